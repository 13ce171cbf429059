//! Values of constant expressions.
//!
//! Whole numbers stay whole: 64 bits, and what does not fit is refused. In version 3 the quotient of two whole numbers is a
//! whole number too; where an angle is wanted, almost nobody means that, so a quotient with a remainder is refused there and
//! rounded towards zero in sizes and indices, as the standard has it. Version 2 has real quotients.

use std::f64::consts::{E, PI, TAU};

use super::refusal::{Place, Refusal};
use super::syntax::Expression;

#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Value {
    Whole(i64),
    Real(f64),
    Truth(bool),
}

impl Value {
    /// The value as the language writes it.
    pub fn shown(self) -> String {
        match self {
            Self::Whole(value) => value.to_string(),
            Self::Real(value) => format!("{value:?}"),
            Self::Truth(value) => value.to_string(),
        }
    }
}

/// What an expression is calculated with.
pub struct Context<'s> {
    pub version: u32,
    /// Whether the value serves as a size, an index or a count.
    pub whole: bool,
    pub names: &'s dyn Fn(&str) -> Option<Value>,
}

type Outcome<T> = Result<T, Refusal>;

impl Context<'_> {
    pub fn value(&self, expression: &Expression) -> Outcome<Value> {
        match expression {
            Expression::Integer(value) => Ok(Value::Whole(*value)),
            Expression::Real(value) => Ok(Value::Real(*value)),
            Expression::Truth(value) => Ok(Value::Truth(*value)),
            Expression::Name(name, place) => self.named(name, *place),
            Expression::Entry(name, place) => Err(place.refuse(format!(
                "an entry of a register is no value known before the circuit runs ({name}[..]); write a constant"
            ))),
            Expression::Unary(sign, inner, place) => unary(sign, self.value(inner)?, *place),
            Expression::Binary(sign, both, place) => {
                let (left, right) = (self.value(&both[0])?, self.value(&both[1])?);
                self.binary(sign, left, right, *place)
            }
            Expression::Call(name, arguments, place) => {
                let values = arguments.iter().map(|argument| self.value(argument)).collect::<Outcome<Vec<_>>>()?;
                self.call(name, &values, *place)
            }
        }
    }

    /// A size, an index or a count.
    pub fn whole_number(&self, expression: &Expression, place: Place) -> Outcome<i64> {
        match self.value(expression)? {
            Value::Whole(value) => Ok(value),
            other => {
                Err(place.refuse(format!("no whole number ({}); sizes, indices and counts are whole", other.shown())))
            }
        }
    }

    /// Whether a condition holds.
    pub fn holds(&self, condition: &Expression, place: Place) -> Outcome<bool> {
        truth(self.value(condition)?, "if", place)
    }

    fn named(&self, name: &str, place: Place) -> Outcome<Value> {
        if let Some(value) = (self.names)(name) {
            return Ok(value);
        }
        Ok(Value::Real(match (name, self.version) {
            ("pi", _) | ("π", 3) => PI,
            ("tau" | "τ", 3) => TAU,
            ("euler" | "ℇ", 3) => E,
            _ => {
                return Err(
                    place.refuse(format!("no constant of this name ({name}); declare it by const, or write pi"))
                );
            }
        }))
    }

    fn binary(&self, sign: &str, left: Value, right: Value, place: Place) -> Outcome<Value> {
        if let (Value::Whole(a), Value::Whole(b)) = (left, right)
            && let Some(value) = self.whole_numbers(sign, a, b, place)?
        {
            return Ok(value);
        }
        if matches!(sign, "&&" | "||") {
            let (a, b) = (truth(left, sign, place)?, truth(right, sign, place)?);
            return Ok(Value::Truth(if sign == "&&" { a && b } else { a || b }));
        }
        if sign == "^" && self.version == 3 {
            return Err(place.refuse(
                "^ is the exclusive or of version 3, which real numbers do not have (^); write the power as **",
            ));
        }
        let (a, b) = (real(left, sign, place)?, real(right, sign, place)?);
        let value = match sign {
            "+" => a + b,
            "-" => a - b,
            "*" => a * b,
            "/" if b == 0.0 => return Err(zero(left, place)),
            "/" => a / b,
            "%" if b == 0.0 => return Err(zero(left, place)),
            "%" => a % b,
            "**" | "^" => power(a, b, place)?,
            "<" => return Ok(Value::Truth(a < b)),
            ">" => return Ok(Value::Truth(a > b)),
            "<=" => return Ok(Value::Truth(a <= b)),
            ">=" => return Ok(Value::Truth(a >= b)),
            "==" => return Ok(Value::Truth(a == b)),
            "!=" => return Ok(Value::Truth(a != b)),
            _ => return Err(place.refuse(format!("real numbers have no such operation ({sign}); use whole numbers"))),
        };
        finite(value, sign, place)
    }

    /// An operation on two whole numbers; None where it is that of real numbers.
    fn whole_numbers(&self, sign: &str, a: i64, b: i64, place: Place) -> Outcome<Option<Value>> {
        let value = match sign {
            "+" => a.checked_add(b),
            "-" => a.checked_sub(b),
            "*" => a.checked_mul(b),
            "/" | "%" if b == 0 => return Err(zero(Value::Whole(a), place)),
            "/" if self.version == 2 => return Ok(None),
            "/" if !self.whole && a.checked_rem(b).is_some_and(|rest| rest != 0) => {
                return Err(place.refuse(format!(
                    "two whole numbers are divided as integers in version 3 ({a}/{b} is {}); write {a}.0/{b}",
                    a / b
                )));
            }
            "/" => a.checked_div(b),
            "%" => a.checked_rem(b),
            "**" | "^" if sign == "**" || self.version == 2 => match u32::try_from(b) {
                Ok(b) => a.checked_pow(b),
                Err(_) if b < 0 => return Ok(None),
                Err(_) => None,
            },
            "^" => Some(a ^ b),
            "&" => Some(a & b),
            "|" => Some(a | b),
            "<<" => u32::try_from(b).ok().filter(|&b| b < 63).and_then(|b| a.checked_mul(1 << b)),
            ">>" => u32::try_from(b).ok().map(|b| a >> b.min(63)),
            _ => return Ok(None),
        };
        let overflow = || place.refuse(format!("a whole number beyond 64 bits ({a} {sign} {b}); write real numbers"));
        value.map(|value| Some(Value::Whole(value))).ok_or_else(overflow)
    }

    fn call(&self, name: &str, values: &[Value], place: Place) -> Outcome<Value> {
        let wanted = match name {
            "mod" | "pow" => 2,
            _ => 1,
        };
        let known = match self.version {
            2 => matches!(name, "sin" | "cos" | "tan" | "exp" | "ln" | "sqrt"),
            _ => {
                let casts = matches!(name, "int" | "uint" | "float" | "angle" | "bool");
                let functions = "sin cos tan arcsin arccos arctan exp log sqrt floor ceiling mod pow popcount";
                casts || functions.split(' ').any(|known| known == name)
            }
        };
        if !known {
            let remedy = if self.version == 2 {
                "version 2 has sin, cos, tan, exp, ln and sqrt"
            } else {
                "version 3 has sin, cos, tan, arcsin, arccos, arctan, exp, log, sqrt, floor, ceiling, mod, pow, popcount"
            };
            return Err(place.refuse(format!("no function of this name for real numbers ({name}); {remedy}")));
        }
        if values.len() != wanted {
            let message = format!("{name} takes another number of values ({} given); give {wanted}", values.len());
            return Err(place.refuse(message));
        }
        let domain = |a: f64| {
            let message = format!("{name} has no real value there ({name}({a:?})); check the argument");
            Err(place.refuse(message))
        };
        match (name, values) {
            ("mod", [a, b]) => return self.binary("%", *a, *b, place),
            ("pow", [a, b]) => return self.binary("**", *a, *b, place),
            ("int" | "uint", [Value::Whole(value)]) => return Ok(Value::Whole(*value)),
            ("int" | "uint", [Value::Real(value)]) if value.abs() < 9e18 => return Ok(Value::Whole(*value as i64)),
            ("popcount", [Value::Whole(value)]) => return Ok(Value::Whole(value.count_ones().into())),
            ("bool", [value]) => return Ok(Value::Truth(truth(*value, name, place)?)),
            ("int" | "uint" | "popcount", [value]) => {
                return Err(place.refuse(format!("{name} takes a whole number ({})", value.shown())));
            }
            _ => {}
        }
        let a = real(values[0], name, place)?;
        let value = match name {
            "sin" => a.sin(),
            "cos" => a.cos(),
            "tan" => a.tan(),
            "arcsin" | "arccos" if a.abs() > 1.0 => return domain(a),
            "arcsin" => a.asin(),
            "arccos" => a.acos(),
            "arctan" => a.atan(),
            "exp" => a.exp(),
            "log" | "ln" if a <= 0.0 => return domain(a),
            "log" | "ln" => a.ln(),
            "sqrt" if a < 0.0 => return domain(a),
            "sqrt" => a.sqrt(),
            "floor" => a.floor(),
            "ceiling" => a.ceil(),
            _ => a,
        };
        finite(value, name, place)
    }
}

fn unary(sign: &str, value: Value, place: Place) -> Outcome<Value> {
    match (sign, value) {
        ("-", Value::Whole(value)) => value
            .checked_neg()
            .map(Value::Whole)
            .ok_or_else(|| place.refuse(format!("a whole number beyond 64 bits (-{value})"))),
        ("-", Value::Real(value)) => Ok(Value::Real(-value)),
        ("!", value) => Ok(Value::Truth(!truth(value, sign, place)?)),
        ("~", Value::Whole(value)) => Ok(Value::Whole(!value)),
        (_, value) => Err(place.refuse(format!("{sign} does not go with this value ({})", value.shown()))),
    }
}

pub fn real(value: Value, what: &str, place: Place) -> Outcome<f64> {
    match value {
        Value::Whole(value) => Ok(value as f64),
        Value::Real(value) => Ok(value),
        Value::Truth(value) => Err(place.refuse(format!("{what} takes a number ({value})"))),
    }
}

fn truth(value: Value, what: &str, place: Place) -> Outcome<bool> {
    match value {
        Value::Truth(value) => Ok(value),
        Value::Whole(value) => Ok(value != 0),
        Value::Real(value) => Err(place.refuse(format!("{what} takes true or false ({value:?})"))),
    }
}

fn power(a: f64, b: f64, place: Place) -> Outcome<f64> {
    if a == 0.0 && b < 0.0 {
        return Err(place.refuse(format!("a power of zero below 0 ({a:?} to the {b:?}); check the exponent")));
    }
    if a < 0.0 && b.fract() != 0.0 {
        return Err(place.refuse(format!("a power that is not real ({a:?} to the {b:?}); check the base")));
    }
    Ok(a.powf(b))
}

fn finite(value: f64, what: &str, place: Place) -> Outcome<Value> {
    if value.is_finite() {
        return Ok(Value::Real(value));
    }
    Err(place.refuse(format!("a value that is not finite ({what} gives {value}); check the numbers")))
}

fn zero(a: Value, place: Place) -> Refusal {
    place.refuse(format!("a division by zero ({}/0); check the divisor", a.shown()))
}
