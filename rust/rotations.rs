//! What a circuit does: ordered Pauli rotations in repeated blocks, a global phase, and a frame. Never expanded.
//!
//! The circuit is e^{iφ} F R: the blocks R first, then the frame F, a Clifford and a relabelling of qubits, which most
//! circuits do not have. `framed` composes circuits with frames.

mod framed;

use std::sync::Arc;

use crate::error::{Error, Result};
use crate::frame::Frame;
use crate::pauli::PauliString;

pub(crate) use framed::mapped;

/// exp(-i angle P).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Rotation {
    /// The string P.
    pub string: PauliString,
    /// The angle in radians, without a factor 1/2.
    pub angle: f64,
}

/// What a block repeats.
#[derive(Clone, Debug, PartialEq)]
pub enum Body {
    /// Rotations, first in time first.
    List(Arc<[Rotation]>),
    /// Blocks inside a block.
    Nested(Arc<[Block]>),
}

/// A body and how often it runs.
#[derive(Clone, Debug, PartialEq)]
pub struct Block {
    /// What is repeated.
    pub body: Body,
    /// How often, at least once.
    pub repeat: u64,
}

impl Block {
    /// Rotations in all repeats together; None beyond 64 bits.
    fn count(&self) -> Option<u64> {
        let once = match &self.body {
            Body::List(list) => list.len() as u64,
            Body::Nested(blocks) => counted(blocks)?,
        };
        once.checked_mul(self.repeat)
    }
}

/// Rotations of blocks one after the other; None beyond 64 bits.
fn counted(blocks: &[Block]) -> Option<u64> {
    blocks.iter().try_fold(0u64, |sum, block| sum.checked_add(block.count()?))
}

/// A circuit of rotations; immutable.
#[derive(Clone, Debug, PartialEq)]
pub struct Rotations {
    qubits: u32,
    blocks: Vec<Block>,
    phase: f64,
    frame: Option<Arc<Frame>>,
}

impl Rotations {
    /// Takes a list as given: nothing is merged, dropped or reduced.
    ///
    /// # Errors
    /// More than 128 qubits, a string outside of them, an angle or phase that is not finite.
    pub fn from_list(qubits: u32, list: Vec<Rotation>, phase: f64) -> Result<Self> {
        if qubits > 128 {
            return Err(refuse("qubits", format!("qubits: too many ({qubits}); strings hold at most 128")));
        }
        let outside = if qubits == 128 { 0 } else { u128::MAX << qubits };
        for (place, rotation) in list.iter().enumerate() {
            if rotation.string.support() & outside != 0 {
                let qubit = 127 - (rotation.string.support() & outside).leading_zeros();
                return Err(refuse(
                    "x, z",
                    format!(
                        "x, z: rotation {place} acts on qubit {qubit}, outside of the {qubits} qubits given; raise qubits"
                    ),
                ));
            }
            if !rotation.angle.is_finite() {
                return Err(refuse(
                    "angles",
                    format!("angles: not finite (angle {place} is {}); give finite radians", rotation.angle),
                ));
            }
        }
        if !phase.is_finite() {
            return Err(refuse("phase", format!("phase: not finite ({phase}); give finite radians")));
        }
        let blocks = if list.is_empty() { vec![] } else { vec![Block { body: Body::List(list.into()), repeat: 1 }] };
        Ok(Self { qubits, blocks, phase, frame: None })
    }

    /// A circuit from blocks of another one.
    ///
    /// # Errors
    /// The phase is not finite, or the rotations in all are beyond 64 bits.
    pub fn from_blocks(qubits: u32, blocks: Vec<Block>, phase: f64) -> Result<Self> {
        Self::checked(qubits, blocks, phase)
    }

    fn checked(qubits: u32, blocks: Vec<Block>, phase: f64) -> Result<Self> {
        if counted(&blocks).is_none() {
            let message = "k: the circuit runs more rotations than 64 bits count; use fewer repeats";
            return Err(refuse("k", message.into()));
        }
        if !phase.is_finite() {
            return Err(refuse("phase", format!("phase: grows out of range ({phase}); use fewer repeats")));
        }
        Ok(Self { qubits, blocks, phase, frame: None })
    }

    /// Number of qubits.
    pub fn qubits(&self) -> u32 {
        self.qubits
    }

    /// The blocks, first in time first.
    pub fn blocks(&self) -> &[Block] {
        &self.blocks
    }

    /// The global phase: the circuit is exp(i phase) times its rotations and its frame.
    pub fn phase(&self) -> f64 {
        self.phase
    }

    /// What follows the blocks, where it is not the identity.
    pub fn frame(&self) -> Option<&Frame> {
        self.frame.as_deref()
    }

    /// Rotations with all repeats.
    pub fn count(&self) -> u64 {
        // Every circuit is made by `checked` or from one that was, so the count fits.
        counted(&self.blocks).unwrap_or(u64::MAX)
    }

    /// Calls `visit` for each list with the number of times it runs in all; lists in order of first use.
    pub fn for_each_list(&self, visit: &mut dyn FnMut(&[Rotation], u64)) {
        visit_lists(&self.blocks, 1, visit);
    }

    /// All rotations written out, or None where there are more than `limit`.
    pub fn written_out(&self, limit: u64) -> Option<Vec<Rotation>> {
        if self.count() > limit {
            return None;
        }
        let mut out = Vec::with_capacity(self.count() as usize);
        write_out(&self.blocks, &mut out);
        Some(out)
    }
}

fn refuse(argument: &'static str, message: String) -> Error {
    Error::Rotation { argument, message }
}

/// [`Rotations::for_each_list`] on bare blocks that run `times` times.
pub(crate) fn visit_lists(blocks: &[Block], times: u64, visit: &mut dyn FnMut(&[Rotation], u64)) {
    for block in blocks {
        let times = times.saturating_mul(block.repeat);
        match &block.body {
            Body::List(list) => visit(list, times),
            Body::Nested(blocks) => visit_lists(blocks, times, visit),
        }
    }
}

fn write_out(blocks: &[Block], out: &mut Vec<Rotation>) {
    for block in blocks {
        for _ in 0..block.repeat {
            match &block.body {
                Body::List(list) => out.extend_from_slice(list),
                Body::Nested(blocks) => write_out(blocks, out),
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one(qubit: u32, angle: f64) -> Rotations {
        let list = vec![Rotation { string: PauliString { x: 1 << qubit, z: 0 }, angle }];
        Rotations::from_list(4, list, 0.25).unwrap()
    }

    #[test]
    fn repeats_cost_no_memory_and_count_right() {
        let step = one(0, 0.1).then(&one(1, 0.2)).unwrap();
        let many = step.times(1_000_000).unwrap().times(1_000_000).unwrap();
        assert_eq!(many.count(), 2_000_000_000_000);
        assert_eq!(many.blocks().len(), 1);
        assert!(many.written_out(1 << 20).is_none());
        let most = many.times(u64::MAX / many.count()).unwrap();
        assert!(most.count() > u64::MAX - 2_000_000_000_000);
        assert!(most.then(&many).unwrap_err().to_string().contains("64 bits"));
        assert!(many.times(1 << 40).unwrap_err().to_string().contains("64 bits"));
    }

    #[test]
    fn the_inverse_reverses_order_and_signs() {
        let circuit = one(0, 0.1).then(&one(1, 0.2)).unwrap().times(2).unwrap();
        let back = circuit.inverse();
        let angles: Vec<f64> = back.written_out(10).unwrap().iter().map(|r| r.angle).collect();
        assert_eq!(angles, [-0.2, -0.1, -0.2, -0.1]);
        assert_eq!(back.phase(), -1.0);
    }

    #[test]
    fn strings_outside_and_numbers_that_are_not_finite_are_refused() {
        let x9 = Rotation { string: PauliString { x: 1 << 9, z: 0 }, angle: 0.1 };
        assert!(Rotations::from_list(4, vec![x9], 0.0).unwrap_err().to_string().contains("qubit 9"));
        let nan = Rotation { string: PauliString { x: 1, z: 0 }, angle: f64::NAN };
        assert!(Rotations::from_list(4, vec![nan], 0.0).unwrap_err().to_string().contains("NaN"));
    }
}
