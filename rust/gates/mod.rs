//! Circuits as gates: written as text, or only counted.
//!
//! ```text
//! rotations ──compile──► gates ──cancel──► text (OpenQASM) or counts (cost)
//! ```
//!
//! | module | holds |
//! | --- | --- |
//! | [`gate`] | the gates, and repeated bodies of them |
//! | [`ladder`] | controlled NOTs that gather a parity, anywhere or along the edges of a device |
//! | [`pair`] | commuting strings on one pair share their gates |
//! | [`device`] | joined qubits, paths, trees; where the logical qubits are |
//! | [`compile`] | rotation by rotation into gates |
//! | [`cancel`] | gates that undo each other go |
//! | [`text`], [`count`] | what becomes of the gates |
//! | [`totals`] | the global phase; which qubits interact |
//!
//! Everything is one stream, so that what is counted is what would be written. Repeated blocks are never written out here.

pub mod cancel;
pub mod compile;
pub mod count;
pub mod device;
pub mod gate;
pub mod ladder;
pub mod pair;
pub mod text;
pub mod totals;
