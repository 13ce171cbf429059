//! Registers, aliases and bits: which qubits an operand names.

use std::collections::HashMap;

use super::expressions::{Context, Value};
use super::gates::Gates;
use super::ranges::steps;
use super::refusal::{Place, Refusal};
use super::syntax::{Expression, Index, Operand};

type Outcome<T> = Result<T, Refusal>;

/// What a name stands for.
#[derive(Clone, Debug)]
pub enum Symbol {
    Qubits(Vec<u32>),
    Bits(u64),
    Value(Value),
}

/// The qubits of one operand.
#[derive(Debug)]
pub enum Wires {
    One(u32),
    Many(Vec<u32>),
}

/// A register of qubits as it was declared.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Register {
    /// As the file has it.
    pub name: String,
    /// Its first qubit; registers follow each other in the order of their declaration.
    pub start: u32,
    /// How many qubits.
    pub size: u32,
}

/// All names that are no gates, innermost scope last.
pub struct Registers<'a> {
    pub version: u32,
    pub qubits: u32,
    /// Whether qubits are those of the machine, `$0`.
    pub machine: bool,
    pub declared: Vec<Register>,
    scopes: Vec<HashMap<&'a str, Symbol>>,
}

pub const MOST_QUBITS: u32 = 128;

impl<'a> Registers<'a> {
    pub fn new(version: u32) -> Self {
        Self { version, qubits: 0, machine: false, declared: vec![], scopes: vec![HashMap::new()] }
    }

    pub fn open(&mut self) {
        self.scopes.push(HashMap::new());
    }

    pub fn close(&mut self) {
        self.scopes.pop();
    }

    pub fn is_top(&self) -> bool {
        self.scopes.len() == 1
    }

    fn symbol(&self, name: &str) -> Option<&Symbol> {
        self.scopes.iter().rev().find_map(|scope| scope.get(name))
    }

    /// Whether the name is one of bits.
    pub fn is_bits(&self, name: &str) -> bool {
        matches!(self.symbol(name), Some(Symbol::Bits(_)))
    }

    /// The constant or loop variable of this name.
    pub fn value(&self, name: &str) -> Option<Value> {
        match self.symbol(name) {
            Some(Symbol::Value(value)) => Some(*value),
            _ => None,
        }
    }

    pub fn declare(&mut self, name: &'a str, symbol: Symbol, gates: &Gates, place: Place) -> Outcome<()> {
        let scope = self.scopes.last_mut().ok_or_else(|| place.refuse("no scope"))?;
        if scope.contains_key(name) || gates.known(name) {
            return Err(place.refuse(format!("declared twice ({name}); choose another name")));
        }
        scope.insert(name, symbol);
        Ok(())
    }

    /// Changes a loop's variable.
    pub fn set(&mut self, name: &'a str, value: i64) {
        if let Some(scope) = self.scopes.last_mut() {
            scope.insert(name, Symbol::Value(Value::Whole(value)));
        }
    }

    /// A new register of qubits.
    pub fn add_qubits(&mut self, name: &'a str, size: i64, gates: &Gates, place: Place) -> Outcome<()> {
        if self.machine {
            return Err(
                place.refuse(format!("declared beside qubits of the machine, such as $0 ({name}); use one kind"))
            );
        }
        let start = self.qubits;
        let room = i64::from(MOST_QUBITS - start);
        if size > room {
            return Err(place.refuse(format!(
                "too many qubits ({size} in {name}, {start} before it); strings hold at most {MOST_QUBITS}"
            )));
        }
        let size = size as u32;
        self.declare(name, Symbol::Qubits((start..start + size).collect()), gates, place)?;
        self.qubits += size;
        self.declared.push(Register { name: name.to_owned(), start, size });
        Ok(())
    }

    /// A size, an index or a count.
    pub fn whole(&self, expression: &Expression, place: Place) -> Outcome<i64> {
        let names = |name: &str| self.value(name);
        Context { version: self.version, whole: true, names: &names }.whole_number(expression, place)
    }

    /// A size: 1 where none is given.
    pub fn size(&self, size: Option<&Expression>, place: Place) -> Outcome<i64> {
        let Some(size) = size else { return Ok(1) };
        match self.whole(size, place)? {
            size @ 1.. => Ok(size),
            size => Err(place.refuse(format!("a register of no entries ({size}); give a size of 1 or more"))),
        }
    }

    /// The name of a qubit as the file has it.
    pub fn shown(&self, qubit: u32) -> String {
        let register = self.declared.iter().find(|one| (one.start..one.start + one.size).contains(&qubit));
        register.map_or(format!("${qubit}"), |register| format!("{}[{}]", register.name, qubit - register.start))
    }

    /// The qubits that an operand names.
    pub fn wires(&mut self, operand: &Operand) -> Outcome<Wires> {
        let place = operand.place;
        if let Some(number) = operand.machine {
            if !self.declared.is_empty() {
                let message = format!("a qubit of the machine beside declared ones ({}); use one kind", operand.name);
                return Err(place.refuse(message));
            }
            if number >= MOST_QUBITS {
                let message = format!("too many qubits ({}); strings hold at most {MOST_QUBITS}", operand.name);
                return Err(place.refuse(message));
            }
            self.machine = true;
            self.qubits = self.qubits.max(number + 1);
            return Ok(Wires::One(number));
        }
        let Some(Symbol::Qubits(all)) = self.symbol(operand.name) else {
            let name = operand.name;
            let known = self.symbol(name).is_some();
            let what = if known { "no register of qubits" } else { "no register of this name" };
            return Err(place.refuse(format!("{what} ({name}); declare it before this line: qubit[2] {name};")));
        };
        match &operand.index {
            // A register of one qubit serves as a qubit: the two are written alike.
            None if all.len() == 1 => Ok(Wires::One(all[0])),
            None => Ok(Wires::Many(all.clone())),
            Some(Index::One(index)) => {
                let at = self.whole(index, place)?;
                Ok(Wires::One(all[entry(operand.name, at, all.len(), place)?]))
            }
            Some(Index::Span(span)) => {
                let last = all.len() as i64 - 1;
                let within = |at: i64| Ok(entry(operand.name, at, all.len(), place)? as i64);
                let start = span.start.as_ref().map_or(Ok(0), |start| within(self.whole(start, place)?))?;
                let stop = span.stop.as_ref().map_or(Ok(last), |stop| within(self.whole(stop, place)?))?;
                let step = span.step.as_ref().map_or(Ok(1), |step| self.whole(step, place))?;
                let count = steps(start, step, stop, place)?;
                if count == 0 {
                    return Err(place.refuse(format!(
                        "an operand of no qubits ({}[{start}:{step}:{stop}]); check its range",
                        operand.name
                    )));
                }
                Ok(Wires::Many((0..count as i64).map(|at| all[(start + at * step) as usize]).collect()))
            }
            Some(Index::Set(set)) if set.is_empty() => {
                Err(place.refuse(format!("an operand of no qubits ({}[{{}}]); name some", operand.name)))
            }
            Some(Index::Set(set)) => {
                let one = |index| Ok(all[entry(operand.name, self.whole(index, place)?, all.len(), place)?]);
                Ok(Wires::Many(set.iter().map(one).collect::<Outcome<_>>()?))
            }
        }
    }

    /// How many bits the target of a measurement names; None where it is no register of bits.
    pub fn bits(&self, operand: &Operand) -> Outcome<u64> {
        let place = operand.place;
        let Some(Symbol::Bits(size)) = self.symbol(operand.name) else {
            let name = operand.name;
            return Err(place.refuse(format!("no register of bits of this name ({name}); declare it: bit[2] {name};")));
        };
        let length = usize::try_from(*size).unwrap_or(usize::MAX);
        match &operand.index {
            None => Ok(*size),
            Some(Index::One(index)) => entry(operand.name, self.whole(index, place)?, length, place).map(|_| 1),
            Some(Index::Set(set)) => Ok(set.len() as u64),
            Some(Index::Span(span)) => {
                let or = |value: &Option<Expression>, other| value.as_ref().map_or(Ok(other), |v| self.whole(v, place));
                let (start, stop) = (or(&span.start, 0)?, or(&span.stop, *size as i64 - 1)?);
                entry(operand.name, start, length, place)?;
                entry(operand.name, stop, length, place)?;
                steps(start, or(&span.step, 1)?, stop, place)
            }
        }
    }
}

/// The entry of a register, negative ones counted from its end.
fn entry(name: &str, at: i64, size: usize, place: Place) -> Outcome<usize> {
    let size = size as i64;
    let found = if at < 0 { at.saturating_add(size) } else { at };
    if (0..size).contains(&found) {
        return Ok(found as usize);
    }
    Err(place.refuse(format!(
        "no entry of the register ({name}[{at}]); it has {size}, from {name}[0] to {name}[{}]",
        size - 1
    )))
}
