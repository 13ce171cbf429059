//! Reads OpenQASM 2 and 3 as a circuit of Pauli rotations.
//!
//! ```text
//! text → lexer → parser, statements → one statement's tree → reader → gates, modifiers → conjugation → Rotations
//! ```
//!
//! One statement is in memory at a time, so a flat file of millions of gates takes little beside its rotations. Loops whose
//! body does not use the variable are read once and stay blocks. What is not a unitary circuit with known values is
//! refused with its line and column. Whatever a text makes the reader do beyond the text's own length (loops, gate bodies,
//! controls) is counted, and refused beyond a limit: a short text cannot take long.
//!
//! Sources: the OpenQASM 3.0 and 3.1 texts, A. Cross et al., ACM Trans. Quantum Comput. 3, 12 (2022); OpenQASM 2,
//! arXiv:1707.03429 (2017). Where they contradict themselves, `library` says what is taken.

mod blocks;
mod calls;
mod conjugation;
mod definitions;
mod expressions;
mod gates;
mod lexer;
mod library;
mod loops;
mod modifiers;
mod parser;
mod powers;
mod ranges;
mod reader;
mod refusal;
mod registers;
mod sources;
mod statements;
mod syntax;
mod tally;

use std::path::Path;

pub use conjugation::Keep;
pub use reader::{Named, Note};
pub use registers::Register;
pub use tally::Counted;

use crate::error::{Error, Result};
use crate::rotations::Rotations;
use parser::Parser;
use reader::{Pulse, Reader, Stop};
use refusal::Refusal;

/// Gates that any text may make beyond its own, and that each byte of it adds.
const EXPANSION: (u64, u64) = (1 << 18, 16);

/// How to read.
#[derive(Clone, Debug, Default)]
pub struct Options<'o> {
    /// Where included files are.
    pub folder: Option<&'o Path>,
    /// What stays a rotation; None chooses, see [`read`].
    pub keep: Option<Keep>,
    /// Gates that prepare the start.
    pub prepare: Option<Named>,
    /// Gates that change the basis before measurement.
    pub basis: Option<Named>,
    /// Gates that loops, bodies and modifiers may make; None is 2^18 and 16 for each byte.
    pub limit: Option<u64>,
    /// Gates of the file that count as one, whatever their bodies.
    pub native: &'o [String],
}

/// What a text says.
#[derive(Clone, Debug)]
pub struct Circuit {
    /// The gates that prepare, the evolution, and the change of basis.
    pub parts: [Rotations; 3],
    /// 2 or 3.
    pub version: u32,
    /// Registers of qubits in order; empty for qubits of the machine.
    pub registers: Vec<Register>,
    /// Gates and loops at the top.
    pub gates: u64,
    /// What was left out, and why.
    pub notes: Vec<Note>,
    /// Comments `// trueturn: …`: line, column and text.
    pub marks: Vec<(u32, u32, String)>,
    /// What stayed a rotation.
    pub keep: Keep,
    /// The gates of the evolution.
    pub counted: Counted,
    turned: [u64; 2],
}

/// Reads a circuit. `pulse` is called now and then, and stops the reading by an error.
///
/// A rotation by a multiple of π/4 is a Clifford as well: rx(π/2) changes a basis in one file and is the evolution in
/// another. Unless `options` say, the text is read in up to three ways (such rotations all join the Clifford; diagonal ones
/// stay; all stay). Among those that leave no Clifford at the end, and some rotation, the one with the fewest different
/// strings is taken; without any, the first.
///
/// # Errors
/// [`Error::Qasm`] with line and column; [`Error::Argument`] for ranges that do not fit the gates.
pub fn read(text: &str, options: &Options, pulse: Pulse) -> Result<Circuit> {
    let files = sources::load(text, options.folder);
    let mut once = |keep| read_once(text, &files, options, keep, pulse);
    if let Some(keep) = options.keep {
        return once(keep);
    }
    let first = once(Keep::Nothing)?;
    let [diagonal, others] = first.turned;
    let mut ways = vec![first];
    if diagonal > 0 {
        ways.push(once(Keep::Diagonal)?);
    }
    if others > 0 {
        ways.push(once(Keep::Rotations)?);
    }
    let plain = |way: &&Circuit| {
        let evolution = &way.parts[1];
        evolution.count() > 0 && evolution.frame().is_none_or(|frame| frame.turns().is_empty())
    };
    let strings = |way: &&Circuit| way.parts[1].distinct_strings();
    let best = ways.iter().filter(plain).min_by_key(strings).unwrap_or(&ways[0]).keep;
    // The ways are told apart by what they keep.
    ways.into_iter().find(|way| way.keep == best).ok_or_else(|| Error::Internal { message: "no way of reading".into() })
}

fn read_once(text: &str, files: &sources::Files, options: &Options, keep: Keep, pulse: Pulse) -> Result<Circuit> {
    let whole = |refusal: Refusal| refused(&refusal, text, String::new());
    let mut parser = Parser::new(0, text, 3).map_err(whole)?;
    let version = reader::version(&mut parser).map_err(whole)?;
    parser.version = version;
    let limit = options.limit.unwrap_or(EXPANSION.0 + EXPANSION.1 * text.len() as u64);
    let mut reader = Reader::new(version, keep, limit, options, files);
    reader.run(&mut parser, pulse).map_err(|stop| match stop {
        Stop::Cancelled(error) => error,
        Stop::Refused(refusal) => {
            let name = reader.source_name(refusal.place.source);
            let own = name.and_then(|name| files.get(name)).and_then(|file| file.as_deref().ok());
            refused(&refusal, own.unwrap_or(text), name.unwrap_or("").to_owned())
        }
    })?;
    let qubits = reader.registers.qubits;
    if qubits == 0 {
        let place = parser.token.place;
        return Err(whole(place.refuse("no qubits are declared; add: qubit[2] q;")));
    }
    require_ranges(options, reader.gate_count)?;
    let marks = parser.lexer.marks.iter().map(|mark| {
        let place = mark.place.refuse("");
        let (line, column) = position(&place, text);
        (line, column, mark.text.to_owned())
    });
    let marks = marks.collect();
    let turned = reader.parts[1].turned;
    let counted = reader.gates.tally.total();
    let [prepare, evolution, basis] = reader.parts.map(|mut part| {
        part.widen(qubits.max(part.qubits()));
        part.finish().map_err(|error| whole(parser.token.place.refuse(error.to_string())))
    });
    Ok(Circuit {
        parts: [prepare?, evolution?, basis?],
        version,
        registers: reader.registers.declared,
        gates: reader.gate_count,
        notes: reader.notes,
        marks,
        keep,
        counted,
        turned,
    })
}

fn require_ranges(options: &Options, gates: u64) -> Result<()> {
    for (argument, named) in [("prepare", options.prepare), ("basis", options.basis)] {
        if let Some(Named::Gates(_, stop)) = named
            && stop > gates
        {
            let message = format!("{argument}: ends after the last gate ({stop}); the circuit has {gates} gates");
            return Err(Error::Argument { argument, message });
        }
    }
    Ok(())
}

/// Line and column in characters.
fn position(refusal: &Refusal, text: &str) -> (u32, u32) {
    let place = refusal.place;
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    let start = place.at.saturating_sub(place.offset);
    let column = text.get(start..place.at).map_or(place.offset, |before| before.chars().count());
    (place.line, column as u32 + 1)
}

fn refused(refusal: &Refusal, text: &str, file: String) -> Error {
    let (line, column) = position(refusal, text);
    Error::Qasm { file, line, column, message: refusal.message.clone() }
}
