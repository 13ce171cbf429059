//! The core of trueturn: Pauli algebra on bit masks and Pauli rotations on state vectors.
//!
//! | module | holds |
//! | --- | --- |
//! | [`pauli`] | one Pauli string as two bit masks, products and commutation |
//! | [`terms`] | real sums of strings: parsing, printing, sums, products, brackets |
//! | [`rotations`] | a circuit: ordered rotations in repeated blocks, and a global phase |
//! | [`clifford`] | Cliffords with their phase: rows of strings, and a state as witness of the phase |
//! | [`frame`] | what a circuit ends with beside rotations: a Clifford and a relabelling |
//! | [`qasm`] | reads OpenQASM 2 and 3 into rotations |
//! | [`cost`] | two-qubit gates and depth, without writing a circuit out |
//! | [`gates`] | circuits as gates of a device, written or counted |
//! | [`operation`] | two commuting rotations with one x mask act as one |
//! | [`passes`] | the planner: which rotations share one traversal of memory |
//! | [`evolve`] | carries the passes out on a state vector |
//! | [`action`], [`apply`] | an operator sorted for use; H applied to a state, expectations, the Chebyshev recurrence |
//! | [`relabel`] | moves the amplitudes of a state to other qubits, in place |
//! | [`sums`] | norm, overlap and distance in a fixed order |
//! | [`team`] | worker threads, requests to stop, progress |
//! | [`kernel`] | inner loops for each instruction set; all unsafe code |
//! | [`twin`] | one rotation by its definition, the oracle of the above |
//! | [`error`] | every way in which an input can be refused |
//!
//! Nothing here knows Python except `python`, which is compiled with the feature of that name.

pub mod action;
pub mod apply;
pub mod clifford;
pub mod cost;
pub mod error;
pub mod evolve;
pub mod frame;
pub mod gates;
pub mod kernel;
pub mod operation;
pub mod passes;
pub mod pauli;
#[cfg(feature = "python")]
pub mod python;
pub mod qasm;
pub mod relabel;
pub mod rotations;
pub mod sums;
pub mod team;
pub mod terms;
pub mod twin;
