//! Sums over a circuit that no gate shows: its global phase, and which qubits interact how often.

use std::f64::consts::FRAC_PI_4;

use crate::rotations::Rotations;

/// The global phase that a circuit has over its gates, in radians: its own, that of identity strings, that of a frame.
pub fn global_phase(circuit: &Rotations) -> f64 {
    let mut phase = circuit.phase();
    circuit.for_each_list(&mut |list, times| {
        for rotation in list.iter().filter(|rotation| rotation.string.support() == 0) {
            phase -= rotation.angle * times as f64;
        }
    });
    let eighths = circuit.frame().map_or(0, |frame| {
        let turned: u32 = frame.turns().iter().map(|turn| u32::from(turn.turns)).sum();
        (u32::from(frame.eighths()) + 7 * turned) % 8
    });
    phase + f64::from(eighths) * FRAC_PI_4
}

/// How often each pair of qubits is a rung of an ascending ladder, row by row.
pub fn rung_counts(circuit: &Rotations) -> Vec<f64> {
    let qubits = circuit.qubits() as usize;
    let mut counts = vec![0.0; qubits * qubits];
    circuit.for_each_list(&mut |list, times| {
        for rotation in list {
            let mut left = rotation.string.support();
            while left & left.wrapping_sub(1) != 0 {
                let one = left.trailing_zeros() as usize;
                left &= left - 1;
                let next = left.trailing_zeros() as usize;
                counts[one * qubits + next] += times as f64;
                counts[next * qubits + one] += times as f64;
            }
        }
    });
    counts
}
