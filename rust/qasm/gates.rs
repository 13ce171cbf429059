//! The gates that a file can call: those of the libraries and its own.

use std::collections::HashMap;
use std::rc::Rc;

use super::conjugation::{Builder, Keep};
use super::expressions::{Context, Value, real};
use super::library::{GATES, Home, Move, Standard};
use super::modifiers::{Applied, Product, controls, modified};
use super::refusal::{Place, Refusal};
use super::syntax::{Call, Definition, Expression, Modifier, Statement};

/// Rotations that one gate with modifiers may take: fifteen controls.
const MOST_ROTATIONS: u64 = 1 << 16;
/// Beyond this a float holds even whole numbers only.
const EXACT: f64 = (1u64 << 53) as f64;
/// Gates that call each other, counted from the innermost.
const DEEPEST: u32 = 200;

type Outcome<T> = Result<T, Refusal>;

#[derive(Clone)]
pub enum Gate<'a> {
    Standard(&'static Standard),
    Own(Rc<Own<'a>>),
}

/// A gate that the file defines, its calls resolved.
pub struct Own<'a> {
    definition: Rc<Definition<'a>>,
    calls: Vec<(usize, Gate<'a>, Vec<u32>)>,
    cost: u64,
    depth: u32,
}

impl Gate<'_> {
    pub fn parameters(&self) -> usize {
        match self {
            Self::Standard(gate) => usize::from(gate.parameters),
            Self::Own(gate) => gate.definition.parameters.len(),
        }
    }

    pub fn qubits(&self) -> usize {
        match self {
            Self::Standard(gate) => usize::from(gate.qubits),
            Self::Own(gate) => gate.definition.qubits.len(),
        }
    }

    /// Calls of library gates that one call makes.
    fn cost(&self) -> u64 {
        match self {
            Self::Standard(_) => 1,
            Self::Own(gate) => gate.cost,
        }
    }
}

/// e^{iγ} on no qubit.
static GPHASE: Standard = Standard {
    name: "gphase",
    parameters: 1,
    qubits: 0,
    home: Home::BuiltIn(3),
    moves: &[Move::Phase([1.0, 0.0, 0.0, 0.0, 0.0])],
};

/// Everything that can be called, and how much may still be.
pub struct Gates<'a> {
    version: u32,
    pub stdgates: bool,
    pub qelib1: bool,
    own: HashMap<&'a str, Gate<'a>>,
    library: HashMap<&'static str, Vec<&'static Standard>>,
    pub constants: HashMap<&'a str, Value>,
    budget: u64,
    limit: u64,
}

impl<'a> Gates<'a> {
    pub fn new(version: u32, limit: u64) -> Self {
        let mut library: HashMap<&'static str, Vec<&'static Standard>> = HashMap::new();
        GATES.iter().for_each(|gate| library.entry(gate.name).or_default().push(gate));
        library.insert(GPHASE.name, vec![&GPHASE]);
        Self {
            version,
            stdgates: false,
            qelib1: false,
            own: HashMap::new(),
            library,
            constants: HashMap::new(),
            budget: limit,
            limit,
        }
    }

    /// Counts work beyond what stands in the text.
    pub fn spend(&mut self, gates: u64, place: Place) -> Outcome<()> {
        match self.budget.checked_sub(gates) {
            Some(left) => self.budget = left,
            None => {
                let message = format!(
                    "loops, gate bodies and modifiers make more than {} gates; \
                     let the loop's body do without its variable, or raise expansion_limit",
                    self.limit
                );
                return Err(place.refuse(message));
            }
        }
        Ok(())
    }

    /// Whether a name is one of a gate at hand.
    pub fn known(&self, name: &str) -> bool {
        self.own.contains_key(name) || self.standard(name).is_some()
    }

    fn standard(&self, name: &str) -> Option<&'static Standard> {
        let found = self.library.get(name)?;
        found.iter().find(|gate| gate.at_hand(self.version, self.stdgates, self.qelib1)).copied()
    }

    pub fn find(&self, name: &str, place: Place) -> Outcome<Gate<'a>> {
        if let Some(gate) = self.own.get(name) {
            return Ok(gate.clone());
        }
        if let Some(gate) = self.standard(name) {
            return Ok(Gate::Standard(gate));
        }
        let own = if self.version == 2 { "qelib1.inc" } else { "stdgates.inc" };
        let remedy = if self.library.contains_key(name) && !(self.stdgates || self.qelib1) {
            format!("it is in {own}, so add: include \"{own}\";")
        } else if let Some(near) = self.nearest(name) {
            format!("it is not in {own}; define it before this line, or did you mean {near}?")
        } else {
            format!("it is not in {own}; define it before this line")
        };
        Err(place.refuse(format!("no gate of this name ({name}); {remedy}")))
    }

    fn nearest(&self, name: &str) -> Option<&str> {
        let standard = self.library.keys().copied().filter(|known| self.standard(known).is_some());
        let known = self.own.keys().copied().chain(standard);
        let close = known.map(|known| (edits(name, known), known)).filter(|&(edits, _)| edits == 1);
        close.min().map(|(_, known)| known)
    }

    /// Takes a definition, with every call in it resolved and counted.
    pub fn define(&mut self, definition: Rc<Definition<'a>>) -> Outcome<()> {
        let Definition { name, parameters, qubits, place, .. } = &*definition;
        if self.known(name) || *name == "gphase" {
            return Err(place.refuse(format!("a gate of this name exists already ({name}); choose another name")));
        }
        for (which, names) in [("parameter", parameters), ("qubit", qubits)] {
            if let Some(twice) = names.iter().enumerate().find(|(at, name)| names[..*at].contains(name)) {
                return Err(place.refuse(format!("gate {name} has two {which}s of one name ({}); rename one", twice.1)));
            }
        }
        let mut calls = Vec::new();
        let (mut cost, mut depth) = (0u64, 0u32);
        for (at, statement) in definition.body.iter().enumerate() {
            let call = match statement {
                Statement::Call(call) => call,
                Statement::Barrier(operands) => {
                    operands.iter().try_for_each(|operand| local(&definition, operand).map(drop))?;
                    continue;
                }
                Statement::Remark(_) => continue,
                Statement::For { place, .. } => {
                    let message = format!(
                        "a loop in a gate body is valid OpenQASM but unsupported here (gate {name}); write its calls \
                         out, or put the loop around calls of the gate"
                    );
                    return Err(place.refuse(message));
                }
                _ => {
                    let message =
                        format!("the body of gate {name} holds something else than gates ({name}); take it out");
                    return Err(place.refuse(message));
                }
            };
            if call.name == *name {
                return Err(call.place.refuse(format!("gate {name} calls itself ({name}); gates cannot recur")));
            }
            let gate = self.find(call.name, call.place)?;
            let on = call.operands.iter().map(|operand| local(&definition, operand)).collect::<Outcome<Vec<u32>>>()?;
            require_arguments(call.name, gate.parameters(), call)?;
            let names = |name: &str| parameters.contains(&name) || self.constants.contains_key(name);
            call.arguments.iter().try_for_each(|argument| known_names(argument, &names, self.version))?;
            for modifier in &call.modifiers {
                match modifier {
                    Modifier::Power(value) | Modifier::Controls(Some(value), ..) => {
                        known_names(value, &names, self.version)?;
                    }
                    _ => {}
                }
            }
            if call.modifiers.is_empty() {
                require_qubits(call, gate.qubits(), 0)?;
            }
            if let Some(twice) = on.iter().enumerate().find(|(at, qubit)| on[..*at].contains(qubit)) {
                let message = format!("{} is applied to one qubit twice ({})", call.name, qubits[*twice.1 as usize]);
                return Err(call.place.refuse(message));
            }
            if let Gate::Own(inner) = &gate {
                depth = depth.max(inner.depth + 1);
            }
            cost = cost.saturating_add(gate.cost());
            calls.push((at, gate, on));
        }
        if depth > DEEPEST {
            let message = format!("gates call each other more than {DEEPEST} deep ({name}); write them flatter");
            return Err(place.refuse(message));
        }
        let name = definition.name;
        self.own.insert(name, Gate::Own(Rc::new(Own { definition, calls, cost, depth })));
        Ok(())
    }

    /// Calculates the modifiers of a call.
    pub fn modifiers(&self, call: &Call, names: &dyn Fn(&str) -> Option<Value>) -> Outcome<Vec<Applied>> {
        let context = Context { version: self.version, whole: false, names };
        let counted = Context { version: self.version, whole: true, names };
        call.modifiers
            .iter()
            .map(|modifier| match modifier {
                Modifier::Inverse => Ok(Applied::Inverse),
                Modifier::Power(exponent) => match context.value(exponent)? {
                    Value::Whole(k) if k.unsigned_abs() <= 1 << 53 => Ok(Applied::Power(k as f64, true)),
                    Value::Real(k) if k.abs() <= EXACT => Ok(Applied::Power(k, k.fract() == 0.0)),
                    other => {
                        let shown = other.shown();
                        Err(call.place.refuse(format!("pow: no exponent up to 2**53 ({shown}); give a smaller number")))
                    }
                },
                Modifier::Controls(None, on_one, _) => Ok(Applied::Controls(1, *on_one)),
                Modifier::Controls(Some(count), on_one, place) => match counted.value(count)? {
                    Value::Whole(count @ 1..=128) => Ok(Applied::Controls(count as u32, *on_one)),
                    other => {
                        Err(place.refuse(format!("no number of controls from 1 to 128 ({}); give one", other.shown())))
                    }
                },
            })
            .collect()
    }

    /// Calculates the angles of a call.
    pub fn arguments(&self, call: &Call, names: &dyn Fn(&str) -> Option<Value>) -> Outcome<Vec<f64>> {
        let context = Context { version: self.version, whole: false, names };
        call.arguments.iter().map(|argument| real(context.value(argument)?, call.name, call.place)).collect()
    }

    /// Applies a gate, modifiers and all, to qubits of the builder; `undo` for its inverse.
    #[allow(clippy::too_many_arguments)]
    pub fn apply(
        &mut self,
        into: &mut Builder,
        gate: &Gate<'a>,
        modifiers: &[Applied],
        arguments: &[f64],
        on: &[u32],
        undo: bool,
        place: Place,
    ) -> Outcome<()> {
        if modifiers.iter().all(|modifier| matches!(modifier, Applied::Inverse)) {
            return self.plain(into, gate, arguments, on, undo ^ (modifiers.len() % 2 == 1), place);
        }
        let qubits = gate.qubits() as u32;
        let names: Vec<u32> = (0..qubits).collect();
        let mut builder = Builder::new(qubits, Keep::Everything);
        self.plain(&mut builder, gate, arguments, &names, false, place)?;
        let mut product = finished(builder, self.limit, place)?;
        if let Gate::Own(_) = gate {
            // The first way of reading that leaves no Clifford keeps ladders together.
            for keep in [Keep::Nothing, Keep::Diagonal, Keep::Rotations] {
                let mut builder = Builder::new(qubits, keep);
                self.plain(&mut builder, gate, arguments, &names, false, place)?;
                let read = builder.finish().map_err(|error| place.refuse(error.to_string()))?;
                if read.frame().is_none() && read.count() <= product.list.len() as u64 {
                    product = Product::of(&read, self.limit).unwrap_or(product);
                    break;
                }
            }
        }
        let mut product = modified(product, qubits, modifiers, self.limit.min(MOST_ROTATIONS), place)?;
        self.spend(product.list.len() as u64, place)?;
        if undo {
            product = product.inverse();
        }
        product.emit(into, on, arguments.is_empty());
        Ok(())
    }

    fn plain(
        &mut self,
        into: &mut Builder,
        gate: &Gate<'a>,
        arguments: &[f64],
        on: &[u32],
        undo: bool,
        place: Place,
    ) -> Outcome<()> {
        let own = match gate {
            Gate::Standard(gate) if gate.qubits == 0 => {
                into.phase(if undo { -arguments[0] } else { arguments[0] });
                return Ok(());
            }
            Gate::Standard(gate) => {
                let count = gate.moves.len();
                for at in 0..count {
                    into.step(&gate.moves[if undo { count - 1 - at } else { at }], arguments, on, undo);
                }
                return Ok(());
            }
            Gate::Own(own) => Rc::clone(own),
        };
        self.spend(own.calls.len() as u64, place)?;
        let count = own.calls.len();
        for at in 0..count {
            let (which, inner, locals) = &own.calls[if undo { count - 1 - at } else { at }];
            let Statement::Call(call) = &own.definition.body[*which] else { continue };
            let parameters = &own.definition.parameters;
            let names = |name: &str| {
                let place = parameters.iter().position(|parameter| *parameter == name);
                place.map(|place| Value::Real(arguments[place])).or_else(|| self.constants.get(name).copied())
            };
            // A fault inside depends on the values of this call, so both places matter; the call's is the user's.
            let inside = |refusal: Refusal| {
                place.refuse(format!(
                    "in gate {}, line {}: {}",
                    own.definition.name, refusal.place.line, refusal.message
                ))
            };
            let values = self.arguments(call, &names).map_err(inside)?;
            let modifiers = self.modifiers(call, &names).map_err(inside)?;
            require_qubits(call, inner.qubits(), controls(&modifiers)).map_err(inside)?;
            let qubits: Vec<u32> = locals.iter().map(|&local| on[local as usize]).collect();
            self.apply(into, inner, &modifiers, &values, &qubits, undo, place)?;
        }
        Ok(())
    }
}

fn finished(builder: Builder, limit: u64, place: Place) -> Outcome<Product> {
    let circuit = builder.finish().map_err(|error| place.refuse(error.to_string()))?;
    Product::of(&circuit, limit).ok_or_else(|| place.refuse("a gate of too many rotations for a modifier; split it"))
}

/// The number of a formal qubit.
fn local(definition: &Definition, operand: &super::syntax::Operand) -> Outcome<u32> {
    if operand.index.is_some() || operand.machine.is_some() {
        let shown = if operand.machine.is_some() { operand.name.to_owned() } else { format!("{}[0]", operand.name) };
        return Err(operand.place.refuse(format!(
            "qubits of a gate cannot be indexed in its body ({shown} in gate {}); name them one by one",
            definition.name
        )));
    }
    let place = definition.qubits.iter().position(|qubit| *qubit == operand.name);
    place.map(|place| place as u32).ok_or_else(|| {
        let name = operand.name;
        operand.place.refuse(format!("gate {} has no qubit of this name ({name}); add it", definition.name))
    })
}

fn known_names(expression: &Expression, known: &dyn Fn(&str) -> bool, version: u32) -> Outcome<()> {
    match expression {
        Expression::Integer(_) | Expression::Real(_) | Expression::Truth(_) => Ok(()),
        Expression::Name(name, _) if known(name) => Ok(()),
        Expression::Name(..) => Context { version, whole: false, names: &|_| None }.value(expression).map(drop),
        Expression::Unary(_, inner, _) => known_names(inner, known, version),
        Expression::Binary(_, both, _) => both.iter().try_for_each(|inner| known_names(inner, known, version)),
        Expression::Call(_, inner, _) => inner.iter().try_for_each(|inner| known_names(inner, known, version)),
    }
}

pub fn require_arguments(name: &str, wanted: usize, call: &Call) -> Outcome<()> {
    let given = call.arguments.len();
    if given == wanted {
        return Ok(());
    }
    let angles = if wanted == 1 { "angle" } else { "angles" };
    Err(call.place.refuse(format!("{name} takes {wanted} {angles} ({given} given); give {wanted}")))
}

pub fn require_qubits(call: &Call, own: usize, controls: u64) -> Outcome<()> {
    let (given, wanted) = (call.operands.len() as u64, own as u64 + controls);
    if given == wanted {
        return Ok(());
    }
    let with = if controls > 0 { " with its controls" } else { "" };
    let qubits = if wanted == 1 { "qubit" } else { "qubits" };
    Err(call.place.refuse(format!("{}{with} takes {wanted} {qubits} ({given} given); give {wanted}", call.name)))
}

/// Edits that turn one word into another, up to 2.
fn edits(from: &str, to: &str) -> u32 {
    let (a, b): (Vec<char>, Vec<char>) = (from.chars().collect(), to.chars().collect());
    if a.len().abs_diff(b.len()) > 1 {
        return 2;
    }
    let start = a.iter().zip(&b).take_while(|(x, y)| x == y).count();
    let end = a[start..].iter().rev().zip(b[start..].iter().rev()).take_while(|(x, y)| x == y).count();
    (a.len().max(b.len()) - start - end).min(2) as u32
}
