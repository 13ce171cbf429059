//! Every way in which an input can be refused, with the facts a caller needs to mend it.

use std::fmt;

/// A refused input. `Display` gives the whole message: argument, what is wrong, value, remedy.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Error {
    /// Operator text that does not parse, or that parses to something that is not Hermitian.
    Term {
        /// One-based line of the offending text.
        line: usize,
        /// One-based column of the offending text, in characters.
        column: usize,
        /// The offending text itself.
        text: String,
        /// What was expected, or what to do.
        expected: String,
    },
    /// Masks, coefficients or a number of qubits that make no operator.
    Operator {
        /// The argument at fault.
        argument: &'static str,
        /// The whole message.
        message: String,
    },
    /// Angles, repeats or phases that make no circuit.
    Rotation {
        /// The argument at fault.
        argument: &'static str,
        /// The whole message.
        message: String,
    },
    /// OpenQASM text that is no unitary circuit with known values.
    Qasm {
        /// The included file at fault; empty for the circuit itself.
        file: String,
        /// One-based line.
        line: u32,
        /// One-based column, in characters.
        column: u32,
        /// What is wrong and what to do.
        message: String,
    },
    /// A setting out of range: a thread count, an environment variable.
    Argument {
        /// The argument or variable at fault.
        argument: &'static str,
        /// The whole message.
        message: String,
    },
    /// A state of the wrong length or number of qubits.
    StateShape {
        /// What was given.
        found: String,
        /// What would do.
        expected: String,
    },
    /// Not an array of amplitudes.
    StateType {
        /// What was given.
        found: String,
        /// What would do.
        expected: &'static str,
    },
    /// An array that cannot be written in place.
    StateLayout {
        /// Why, and what to do.
        reason: &'static str,
    },
    /// An array in use by another call.
    StateBusy,
    /// A result that would not fit in memory.
    Memory {
        /// The whole message.
        message: String,
        /// Bytes needed, at least.
        needed: u64,
        /// Bytes allowed.
        available: u64,
    },
    /// The caller asked to stop; the state holds the result of the passes that were finished.
    Cancelled {
        /// Passes that were finished.
        passes_done: u64,
    },
    /// The caller asked twice to stop; the pass was left half-way and the state holds nothing meaningful.
    Abandoned,
    /// A bug of ours.
    Internal {
        /// What went wrong.
        message: String,
    },
}

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Term { line, column, text, expected } => {
                write!(f, "text: refused at line {line}, column {column} ({text:?}); {expected}")
            }
            Self::Qasm { file, line, column, message } => {
                let file = if file.is_empty() { "circuit" } else { file };
                write!(f, "{file}: line {line}, column {column}: {message}")
            }
            Self::Operator { message, .. }
            | Self::Rotation { message, .. }
            | Self::Argument { message, .. }
            | Self::Memory { message, .. } => f.write_str(message),
            Self::StateShape { found, expected } => write!(f, "state: wrong shape ({found}); give {expected}"),
            Self::StateType { found, expected } => write!(f, "state: wrong type ({found}); give {expected}"),
            Self::StateLayout { reason } => write!(f, "state: cannot be evolved in place: {reason}"),
            Self::StateBusy => f.write_str("state: the array is in use by another call; wait for it or evolve a copy"),
            Self::Cancelled { passes_done } => write!(f, "stopped on request after {passes_done} finished passes"),
            Self::Abandoned => f.write_str("stopped at once on a second request; the state is spoiled"),
            Self::Internal { message } => {
                write!(f, "internal error: {message}; please report it with the output of trueturn.build_info()")
            }
        }
    }
}

impl std::error::Error for Error {}

/// Shorthand used throughout the crate.
pub type Result<T> = std::result::Result<T, Error>;
