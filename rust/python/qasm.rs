//! Reading OpenQASM from Python.

use std::path::PathBuf;

use pyo3::prelude::*;

use super::gateway::run_checked;
use super::rotations::PyRotations;
use crate::qasm::{Counted, Keep, Named, Options, read};

/// A range: whether it counts lines, and its ends.
type Range = (bool, u64, u64);

/// Two-qubit gates, swaps, larger and one-qubit gates; Clifford, T-like and other rotations; depth, two-qubit depth.
type Counts = ([u64; 4], [u64; 3], [Option<u64>; 2]);

/// What was read: preparation, evolution, basis; version; registers; gates; notes; marks; what stayed a rotation; counts.
type Found = (
    [PyRotations; 3],
    u32,
    Vec<(String, u32, u32)>,
    u64,
    Vec<(u32, String)>,
    Vec<(u32, u32, String)>,
    &'static str,
    Counts,
);

const WAYS: [(&str, Keep); 3] =
    [("clifford", Keep::Nothing), ("diagonal", Keep::Diagonal), ("rotations", Keep::Rotations)];

/// Reads OpenQASM text; `native` are gates of the file that count as one; `keep` is one of "clifford", "diagonal", "rotations", or anything else to choose.
#[pyfunction]
#[allow(clippy::too_many_arguments)]
pub fn read_qasm(
    py: Python<'_>,
    text: &str,
    folder: Option<PathBuf>,
    keep: &str,
    prepare: Option<Range>,
    basis: Option<Range>,
    limit: Option<u64>,
    native: Vec<String>,
) -> PyResult<Found> {
    let named = |range: Range| match range {
        (true, start, stop) => Named::Lines(start, stop),
        (false, start, stop) => Named::Gates(start, stop),
    };
    let options = Options {
        folder: folder.as_deref(),
        keep: WAYS.iter().find(|(name, _)| *name == keep).map(|(_, way)| *way),
        prepare: prepare.map(named),
        basis: basis.map(named),
        limit,
        native: &native,
    };
    let found = run_checked(py, |check| read(text, &options, check))?;
    let way = WAYS.iter().find(|(_, way)| *way == found.keep).map_or("", |(name, _)| name);
    Ok((
        found.parts.map(|rotations| PyRotations { rotations }),
        found.version,
        found.registers.into_iter().map(|one| (one.name, one.start, one.size)).collect(),
        found.gates,
        found.notes.into_iter().map(|note| (note.line, note.text)).collect(),
        found.marks,
        way,
        counts(&found.counted),
    ))
}

fn counts(counted: &Counted) -> Counts {
    let all = &counted.counts;
    let gates = [all.controlled, all.swaps, all.larger, all.one_qubit];
    let rotations = [all.clifford_rotations, all.t_rotations, all.other_rotations];
    (gates, rotations, [counted.depth, counted.two_qubit_depth])
}
