//! The core of trueturn: Pauli algebra on bit masks and Pauli rotations on state vectors.
//!
//! | module | holds |
//! | --- | --- |
//! | [`pauli`] | one Pauli string as two bit masks, products and commutation |
//! | [`terms`] | real sums of strings: parsing, printing, sums, products, brackets |
//! | [`error`] | every way in which an input can be refused |
//!
//! Nothing here knows Python except `python`, which is compiled with the feature of that name.

pub mod error;
pub mod pauli;
#[cfg(feature = "python")]
pub mod python;
pub mod terms;
