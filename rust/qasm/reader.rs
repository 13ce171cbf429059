//! Carries statements out as they are read.

use super::Options;
use super::calls::{require_arguments, require_qubits};
use super::conjugation::{Builder, Keep};
use super::expressions::{Context, Value, real};
use super::gates::Gates;
use super::lexer::Kind;
use super::modifiers::controls;
use super::parser::Parser;
use super::refusal::{Place, Refusal};
use super::registers::{Registers, Symbol, Wires};
use super::sources::{Files, QELIB1, STDGATES};
use super::syntax::{Call, Definition, Expression, Operand, Statement};

type Outcome<T> = Result<T, Refusal>;

/// A range of gates that the user names: by their numbers, or by lines.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Named {
    /// Half-open; the first gate is 0, and a loop counts as one.
    Gates(u64, u64),
    /// Both ends included, one-based.
    Lines(u64, u64),
}

impl Named {
    fn holds(self, gate: u64, line: u64) -> bool {
        match self {
            Self::Gates(start, stop) => (start..stop).contains(&gate),
            Self::Lines(start, stop) => (start..=stop).contains(&line),
        }
    }
}

/// Something that the reader wants known.
#[derive(Clone, Debug)]
pub struct Note {
    /// One-based.
    pub line: u32,
    /// What was done.
    pub text: String,
}

/// Which part of the circuit a gate belongs to.
const PREPARATION: usize = 0;
const EVOLUTION: usize = 1;
const BASIS: usize = 2;

pub struct Reader<'a> {
    pub registers: Registers<'a>,
    pub gates: Gates<'a>,
    pub parts: [Builder; 3],
    pub part: usize,
    pub named: [Option<Named>; 2],
    pub gate_count: u64,
    pub notes: Vec<Note>,
    files: &'a Files,
    opened: Vec<&'a str>,
    measured: u128,
    statements: u64,
}

/// Asks now and then whether to go on.
pub type Pulse<'p> = &'p mut dyn FnMut() -> crate::error::Result<()>;

/// Why reading stopped.
pub enum Stop {
    Refused(Refusal),
    Cancelled(crate::error::Error),
}

impl From<Refusal> for Stop {
    fn from(refusal: Refusal) -> Self {
        Self::Refused(refusal)
    }
}

impl<'a> Reader<'a> {
    pub fn new(version: u32, keep: Keep, limit: u64, options: &Options, files: &'a Files) -> Self {
        let named = [options.prepare, options.basis];
        let mut gates = Gates::new(version, limit, options.native);
        gates.tally.counts = named[0].is_none();
        Self {
            registers: Registers::new(version),
            gates,
            parts: [0, 1, 2].map(|_| Builder::new(0, keep)),
            part: if named[0].is_some() { PREPARATION } else { EVOLUTION },
            named,
            gate_count: 0,
            notes: vec![],
            files,
            opened: vec![],
            measured: 0,
            statements: 0,
        }
    }

    /// Reads a whole source.
    pub fn run(&mut self, parser: &mut Parser<'a>, pulse: Pulse) -> Result<(), Stop> {
        loop {
            let line = parser.token.place.line;
            match parser.statement()? {
                Statement::End => return Ok(()),
                Statement::Include(name, place) => self.include(name, place, parser.version, pulse)?,
                Statement::Gate(definition) => self.define(*definition)?,
                statement => self.top(&statement, line, pulse)?,
            }
        }
    }

    fn include(&mut self, name: &'a str, place: Place, version: u32, pulse: Pulse) -> Result<(), Stop> {
        match name {
            STDGATES => self.gates.stdgates = true,
            QELIB1 => self.gates.qelib1 = true,
            _ => {
                if self.opened.contains(&name) {
                    return Err(place.refuse(format!("included twice ({name}); once is enough")).into());
                }
                let text = match self.files.get(name) {
                    Some(Ok(text)) => text,
                    Some(Err(why)) => return Err(place.refuse(format!("cannot be included ({name}); {why}")).into()),
                    None => {
                        return Err(place
                            .refuse(format!("cannot be included ({name}); write its name plainly"))
                            .into());
                    }
                };
                self.opened.push(name);
                if self.opened.len() > 100 {
                    return Err(place.refuse("more than 100 included files; join some of them").into());
                }
                let mut parser = Parser::new(self.opened.len() as u32, text, version)?;
                self.run(&mut parser, pulse)?;
            }
        }
        Ok(())
    }

    /// The name of a source.
    pub fn source_name(&self, source: u32) -> Option<&'a str> {
        self.opened.get((source as usize).checked_sub(1)?).copied()
    }

    fn top(&mut self, statement: &Statement<'a>, line: u32, pulse: Pulse) -> Result<(), Stop> {
        if let Statement::Call(Call { place, .. }) | Statement::For { place, .. } | Statement::If { place, .. } =
            statement
        {
            self.enter_part(line, *place)?;
            self.gate_count += 1;
        }
        self.carry_out(statement, pulse)
    }

    /// Finds the part of the circuit that the next gate belongs to.
    fn enter_part(&mut self, line: u32, place: Place) -> Outcome<()> {
        let [prepare, basis] = self.named;
        let inside = |named: Option<Named>| named.is_some_and(|range| range.holds(self.gate_count, line.into()));
        // Lines count in the circuit's own file.
        let own = place.source == 0
            || matches!((prepare, basis), (Some(Named::Gates(..)) | None, Some(Named::Gates(..)) | None));
        let part = match (own && inside(prepare), own && inside(basis)) {
            (true, true) => {
                return Err(place.refuse("prepare and basis name the same gate; name each gate once"));
            }
            (true, false) => PREPARATION,
            (false, true) => BASIS,
            (false, false) => EVOLUTION,
        };
        if part < self.part {
            let message = if part == PREPARATION {
                "prepare: names gates after others that it does not name; let it start with the first gate"
            } else {
                "basis: ends before the last gate; let it end with it"
            };
            return Err(place.refuse(message));
        }
        self.part = part;
        self.gates.tally.counts = part == EVOLUTION;
        Ok(())
    }

    fn define(&mut self, definition: Definition<'a>) -> Outcome<()> {
        if self.registers.value(definition.name).is_some() {
            let message = format!("declared twice ({}); choose another name", definition.name);
            return Err(definition.place.refuse(message));
        }
        self.gates.define(definition)
    }

    pub fn carry_out(&mut self, statement: &Statement<'a>, pulse: Pulse) -> Result<(), Stop> {
        self.statements += 1;
        if self.statements & 0xfff == 0 {
            pulse().map_err(Stop::Cancelled)?;
        }
        match statement {
            Statement::Qubits { name, size, place } => {
                let size = self.registers.size(size.as_ref(), *place)?;
                self.registers.add_qubits(name, size, &self.gates, *place)?;
            }
            Statement::Bits { name, size, place } => {
                let size = self.registers.size(size.as_ref(), *place)? as u64;
                self.registers.declare(name, Symbol::Bits(size), &self.gates, *place)?;
            }
            Statement::Constant { kind, name, value, place } => {
                let value = self.constant(kind, value, *place)?;
                self.registers.declare(name, Symbol::Value(value), &self.gates, *place)?;
                if self.registers.is_top() {
                    self.gates.constants.insert(name, value);
                }
            }
            Statement::Alias { name, parts, place } => {
                let mut all = Vec::new();
                for part in parts {
                    match self.registers.wires(part)? {
                        Wires::One(one) => all.push(one),
                        Wires::Many(many) => all.extend(many),
                    }
                    if all.len() > 1 << 12 {
                        return Err(place.refuse("an alias of more than 4096 qubits; make it shorter").into());
                    }
                }
                if all.is_empty() {
                    return Err(place.refuse(format!("an alias of no qubits ({name}); check its ranges")).into());
                }
                self.registers.declare(name, Symbol::Qubits(all), &self.gates, *place)?;
            }
            Statement::Call(call) => self.call(call)?,
            Statement::Barrier(operands) | Statement::Delay(operands, _) => {
                if let Statement::Delay(_, place) = statement {
                    self.note(*place, "delays are left out: they change nothing in a circuit without noise");
                }
                let mut on = Vec::new();
                for operand in operands {
                    match self.registers.wires(operand)? {
                        Wires::One(one) => on.push(one),
                        Wires::Many(many) => on.extend(many),
                    }
                }
                if operands.is_empty() {
                    on.extend(0..self.registers.qubits);
                }
                if let Statement::Barrier(_) = statement {
                    self.gates.tally.barrier(on.into_iter());
                }
            }
            Statement::Measure { qubits, target, declares, place } => {
                if !self.registers.is_top() {
                    return Err(place.refuse("measure inside a loop or a branch; move it out").into());
                }
                self.measure(qubits, target.as_deref(), *declares, *place)?;
            }
            Statement::For { variable, range, body, place } => self.repeat(variable, range, body, *place, pulse)?,
            Statement::If { condition, bodies, place } => self.branch(condition, bodies, *place, pulse)?,
            Statement::Remark(place) => self.note(*place, "pragmas and annotations are left out"),
            // Never inside a block, and met at the top already.
            Statement::Include(..) | Statement::Gate(_) | Statement::End => {}
        }
        Ok(())
    }

    /// Adds a note unless one says so already.
    fn note(&mut self, place: Place, text: &str) {
        if place.source == 0 && self.notes.iter().all(|note| note.text != text) {
            self.notes.push(Note { line: place.line, text: text.to_owned() });
        }
    }

    fn constant(&self, kind: &str, value: &Expression, place: Place) -> Outcome<Value> {
        let names = |name: &str| self.registers.value(name);
        let whole = matches!(kind, "int" | "uint");
        let found = Context { version: self.registers.version, whole, names: &names }.value(value)?;
        match (kind, found) {
            ("int" | "uint", Value::Whole(_)) | ("bool", Value::Truth(_)) => Ok(found),
            ("int" | "uint", _) => {
                Err(place.refuse(format!("no whole number ({}); declare it as const float", found.shown())))
            }
            ("bool", _) => {
                Err(place.refuse(format!("neither true nor false ({}); declare it as const float", found.shown())))
            }
            _ => real(found, "a const", place).map(Value::Real),
        }
    }

    fn call(&mut self, call: &Call<'a>) -> Outcome<()> {
        let gate = self.gates.find(call.name, call.place)?;
        require_arguments(call.name, gate.parameters(), call)?;
        let names = |name: &str| self.registers.value(name);
        let arguments = self.gates.arguments(call, &names)?;
        let modifiers = if call.modifiers.is_empty() { vec![] } else { self.gates.modifiers(call, &names)? };
        let added = controls(&modifiers);
        require_qubits(call, gate.qubits(), added)?;
        let mut wires = Vec::with_capacity(call.operands.len());
        let mut width = None;
        for operand in &call.operands {
            let found = self.registers.wires(operand)?;
            if let Wires::Many(many) = &found
                && *width.get_or_insert(many.len()) != many.len()
            {
                let message = format!(
                    "registers of different sizes in one gate ({} and {} qubits); use registers of one size",
                    width.unwrap_or(0),
                    many.len()
                );
                return Err(operand.place.refuse(message));
            }
            wires.push(found);
        }
        let builder = &mut self.parts[self.part];
        if builder.qubits() < self.registers.qubits {
            builder.widen(self.registers.qubits);
        }
        let mut on = Vec::with_capacity(wires.len());
        for copy in 0..width.unwrap_or(1) {
            on.clear();
            on.extend(wires.iter().map(|wire| match wire {
                Wires::One(qubit) => *qubit,
                Wires::Many(many) => many[copy],
            }));
            let mut used = 0u128;
            for &qubit in &on {
                if used >> qubit & 1 == 1 {
                    let shown = self.registers.shown(qubit);
                    return Err(call.place.refuse(format!(
                        "{} is applied to one qubit twice ({shown}); use different qubits",
                        call.name
                    )));
                }
                used |= 1 << qubit;
            }
            if used & self.measured != 0 {
                let shown = self.registers.shown((used & self.measured).trailing_zeros());
                return Err(call.place.refuse(format!(
                    "a gate after measure ({} on {shown}) is unsupported here; only measurements at the end can be read",
                    call.name
                )));
            }
            self.gates.apply(builder, &gate, &modifiers, &arguments, &on, false, call.place)?;
        }
        Ok(())
    }

    fn measure(
        &mut self,
        qubits: &Operand<'a>,
        target: Option<&Operand<'a>>,
        declares: bool,
        place: Place,
    ) -> Outcome<()> {
        let found = match self.registers.wires(qubits)? {
            Wires::One(one) => vec![one],
            Wires::Many(many) => many,
        };
        if let Some(target) = target {
            if declares {
                let bits = Symbol::Bits(found.len() as u64);
                self.registers.declare(target.name, bits, &self.gates, target.place)?;
            }
            let bits = self.registers.bits(target)?;
            if bits != found.len() as u64 {
                let message = format!("measure of {} qubits into {bits} bits; use registers of one size", found.len());
                return Err(place.refuse(message));
            }
        }
        found.into_iter().for_each(|qubit| self.measured |= 1 << qubit);
        self.note(place, "measurements at the end are left out: what is read is the unitary before them");
        Ok(())
    }
}

/// The version that the text states; 3 where it states none.
pub fn version(parser: &mut Parser) -> Outcome<u32> {
    if parser.token.kind == Kind::End {
        return Err(parser.token.place.refuse("the text is empty; give an OpenQASM circuit"));
    }
    if !parser.is("OPENQASM") {
        return Ok(3);
    }
    parser.take()?;
    let number = parser.token;
    let version = match number.text {
        "2.0" | "2" => 2,
        "3.0" | "3" | "3.1" => 3,
        other => {
            return Err(number.place.refuse(format!("no version that can be read ({other}); 2.0, 3.0 and 3.1 can")));
        }
    };
    parser.take()?;
    parser.expect(";", "the version")?;
    Ok(version)
}
