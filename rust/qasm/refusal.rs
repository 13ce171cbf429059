//! Why a text is refused, and where.

/// Where something stands.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Place {
    /// 0 is the circuit itself, others are included files.
    pub source: u32,
    /// One-based.
    pub line: u32,
    /// Bytes from the start of the line.
    pub offset: usize,
    /// Bytes from the start of the text.
    pub at: usize,
}

impl Place {
    /// A refusal here.
    pub fn refuse(self, message: impl Into<String>) -> Refusal {
        Refusal { place: self, message: message.into() }
    }
}

/// A refusal; becomes [`crate::error::Error::Qasm`] once the names of the sources are at hand.
#[derive(Clone, Debug)]
pub struct Refusal {
    pub place: Place,
    pub message: String,
}
