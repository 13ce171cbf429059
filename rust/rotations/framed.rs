//! Circuits one after the other, repeated and undone, where a frame may stand between them.
//!
//! With R the blocks and F the frame of a circuit, F_2 R_2 F_1 R_1 = (F_2 F_1) (F_1† R_2 F_1) R_1: what follows a frame is
//! pulled back through it, which turns each string into another one up to a sign and keeps blocks and repeats.

use std::collections::HashSet;
use std::f64::consts::FRAC_PI_4;
use std::sync::Arc;

use super::{Block, Body, Rotation, Rotations, refuse};
use crate::clifford::Signed;
use crate::error::Result;
use crate::frame::Frame;
use crate::pauli::PauliString;

/// Size to which repeats may be written out where a frame changes them from repeat to repeat: rotations, and
/// [`LIST_SIZE`] for each list.
const WRITTEN_OUT: u64 = 1 << 19;
/// What a list takes beside its rotations, in rotations.
const LIST_SIZE: u64 = 4;

impl Rotations {
    /// This circuit followed by a frame.
    ///
    /// # Errors
    /// The phase grows beyond what a float holds.
    pub fn with_frame(&self, frame: &Frame) -> Result<Self> {
        let whole = match &self.frame {
            Some(own) => own.then(frame),
            None => frame.clone(),
        };
        Self::framed(self.qubits, self.blocks.clone(), self.phase, whole)
    }

    /// One circuit after the other.
    ///
    /// # Errors
    /// The numbers of qubits differ, the phases add up to more than a float holds, or the rotations to more
    /// than 64 bits count.
    pub fn then(&self, next: &Self) -> Result<Self> {
        if self.qubits != next.qubits {
            return Err(refuse(
                "other",
                format!(
                    "other: acts on {} qubits, this one on {}; build both with the same qubits",
                    next.qubits, self.qubits
                ),
            ));
        }
        let later = match &self.frame {
            Some(frame) => mapped(&next.blocks, &|string| frame.pull(string)),
            None => next.blocks.clone(),
        };
        let blocks = self.blocks.iter().cloned().chain(later).collect();
        let phase = self.phase + next.phase;
        match (&self.frame, &next.frame) {
            (None, None) => Self::checked(self.qubits, blocks, phase),
            (Some(only), None) | (None, Some(only)) => Self::framed(self.qubits, blocks, phase, (**only).clone()),
            (Some(first), Some(second)) => Self::framed(self.qubits, blocks, phase, first.then(second)),
        }
    }

    /// The circuit `repeat` times over, at no cost in memory unless its frame changes its strings. Zero repeats give the
    /// empty circuit.
    ///
    /// # Errors
    /// The phase grows beyond what a float holds, the rotations beyond what 64 bits count; a frame whose repeats come back to themselves too late to write out.
    pub fn times(&self, repeat: u64) -> Result<Self> {
        let phase = self.phase * repeat as f64;
        let Some(frame) = &self.frame else {
            return Self::checked(self.qubits, repeated(&self.blocks, repeat), phase);
        };
        // (F R)^k = F^k (F^{-(k-1)} R F^{k-1}) ⋯ (F^{-1} R F) R, and the factors repeat once F has come back to itself.
        let size = self.written_size();
        let mut period = self.blocks.clone();
        let mut latest = self.blocks.clone();
        let mut length = 1u64;
        while length < repeat && !self.blocks.is_empty() {
            latest = mapped(&latest, &|string| frame.pull(string));
            if latest == self.blocks {
                break;
            }
            length += 1;
            if size.saturating_mul(length) > WRITTEN_OUT {
                return Err(refuse(
                    "k",
                    format!(
                        "k: the circuit ends in a Clifford or relabelling that changes its strings from repeat to \
                         repeat, and {repeat} repeats come back to none within about {WRITTEN_OUT} rotations; \
                         use fewer repeats"
                    ),
                ));
            }
            period.extend(latest.iter().cloned());
        }
        let mut blocks = repeated(&period, repeat / length);
        let rest = (repeat % length) as usize * self.blocks.len();
        blocks.extend_from_slice(&period[..rest]);
        Self::framed(self.qubits, blocks, phase, frame.power(repeat))
    }

    /// The circuit that undoes this one.
    pub fn inverse(&self) -> Self {
        let blocks = inverted(&self.blocks);
        let Some(frame) = &self.frame else {
            return Self { qubits: self.qubits, blocks, phase: -self.phase, frame: None };
        };
        // (F R)† = F† (F R† F†).
        let back = frame.inverse();
        let blocks = mapped(&blocks, &|string| back.pull(string));
        Self { qubits: self.qubits, blocks, phase: -self.phase, frame: Some(Arc::new(back)) }
    }

    /// Drops a frame that does nothing; its phase joins the circuit's.
    pub(crate) fn framed(qubits: u32, blocks: Vec<Block>, phase: f64, frame: Frame) -> Result<Self> {
        if frame.is_scalar() {
            return Self::checked(qubits, blocks, phase + f64::from(frame.eighths()) * FRAC_PI_4);
        }
        let plain = Self::checked(qubits, blocks, phase)?;
        Ok(Self { frame: Some(Arc::new(frame)), ..plain })
    }

    /// The same circuit with more qubits, which it leaves alone.
    pub(crate) fn widened(self, qubits: u32) -> Self {
        let frame = self.frame.map(|frame| Arc::new(frame.widened(qubits)));
        Self { qubits, frame, ..self }
    }

    /// The same circuit on its first qubits only; None where it does something to others.
    pub fn narrowed(&self, qubits: u32) -> Option<Self> {
        let outside = if qubits >= 128 { 0 } else { u128::MAX << qubits };
        let mut inside = true;
        self.for_each_list(&mut |list, _| inside &= list.iter().all(|one| one.string.support() & outside == 0));
        let frame = match &self.frame {
            Some(frame) => Some(Arc::new(frame.narrowed(qubits)?)),
            None => None,
        };
        let keeps = inside && qubits <= self.qubits;
        keeps.then(|| Self { qubits, blocks: self.blocks.clone(), phase: self.phase, frame })
    }

    /// How many different strings there are.
    pub fn distinct_strings(&self) -> usize {
        let mut strings = HashSet::new();
        self.for_each_list(&mut |list, _| strings.extend(list.iter().map(|rotation| rotation.string)));
        strings.len()
    }

    /// Rotations held in memory, and what holds them.
    fn written_size(&self) -> u64 {
        let mut size = 0u64;
        self.for_each_list(&mut |list, _| size += list.len() as u64 + LIST_SIZE);
        size
    }
}

fn repeated(blocks: &[Block], repeat: u64) -> Vec<Block> {
    match (repeat, blocks) {
        (0, _) | (_, []) => vec![],
        (1, blocks) => blocks.to_vec(),
        (_, [one]) if one.repeat.checked_mul(repeat).is_some() => {
            vec![Block { body: one.body.clone(), repeat: one.repeat * repeat }]
        }
        (_, blocks) => vec![Block { body: Body::Nested(blocks.into()), repeat }],
    }
}

/// The blocks with each string replaced; a minus sign goes to the angle.
pub(crate) fn mapped(blocks: &[Block], map: &dyn Fn(PauliString) -> Signed) -> Vec<Block> {
    let one = |block: &Block| {
        let body = match &block.body {
            Body::List(list) => Body::List(list.iter().map(|rotation| turned(rotation, map)).collect()),
            Body::Nested(blocks) => Body::Nested(mapped(blocks, map).into()),
        };
        Block { body, repeat: block.repeat }
    };
    blocks.iter().map(one).collect()
}

fn turned(rotation: &Rotation, map: &dyn Fn(PauliString) -> Signed) -> Rotation {
    let Signed { string, negative } = map(rotation.string);
    Rotation { string, angle: if negative { -rotation.angle } else { rotation.angle } }
}

fn inverted(blocks: &[Block]) -> Vec<Block> {
    let invert = |block: &Block| {
        let body = match &block.body {
            Body::List(list) => {
                Body::List(list.iter().rev().map(|r| Rotation { string: r.string, angle: -r.angle }).collect())
            }
            Body::Nested(blocks) => Body::Nested(inverted(blocks).into()),
        };
        Block { body, repeat: block.repeat }
    };
    blocks.iter().rev().map(invert).collect()
}
