//! The gates that a file can call: those of the libraries and its own.

use std::collections::{HashMap, HashSet};
use std::rc::Rc;

use super::definitions::Own;
use super::expressions::{Context, Value, real};
use super::library::{GATES, Home, Move, Standard};
use super::modifiers::Applied;
use super::refusal::{Place, Refusal};
use super::syntax::{Call, Modifier};
use super::tally::Tally;

/// Beyond this a float holds even whole numbers only.
const EXACT: f64 = (1u64 << 53) as f64;

type Outcome<T> = Result<T, Refusal>;

#[derive(Clone)]
pub enum Gate<'a> {
    Standard(&'static Standard),
    Own(Rc<Own<'a>>),
}

impl Gate<'_> {
    pub fn parameters(&self) -> usize {
        match self {
            Self::Standard(gate) => usize::from(gate.parameters),
            Self::Own(gate) => gate.parameters.len(),
        }
    }

    pub fn qubits(&self) -> usize {
        match self {
            Self::Standard(gate) => usize::from(gate.qubits),
            Self::Own(gate) => gate.qubits.len(),
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

/// Everything that can be called, how much may still be, and what was.
pub struct Gates<'a> {
    pub version: u32,
    pub stdgates: bool,
    pub qelib1: bool,
    pub own: HashMap<&'a str, Gate<'a>>,
    library: HashMap<&'static str, Vec<&'static Standard>>,
    pub constants: HashMap<&'a str, Value>,
    /// Gates of the file that count as one.
    pub native: HashSet<String>,
    pub tally: Tally,
    budget: u64,
    pub limit: u64,
}

impl<'a> Gates<'a> {
    pub fn new(version: u32, limit: u64, native: &[String]) -> Self {
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
            native: native.iter().cloned().collect(),
            tally: Tally::default(),
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
