//! Renames the qubits of a state vector in place.
//!
//! Qubit a trading places with qubit b > a exchanges each amplitude whose index has bit a set and bit b clear with the one
//! that has them the other way round. A permutation is a product of cycles, and a cycle over m qubits is m - 1 such trades,
//! each of which walks over half of the memory and uses none beside it. Amplitudes move whole, so nothing is rounded. This
//! runs on the calling thread: it happens at most once a circuit, against thousands of passes.

use num_complex::Complex;

use crate::error::Result;
use crate::kernel::lanes::Real;
use crate::team::Control;

/// The trades, in the order they are to be made, that move qubit q to `moves[q]`.
fn trades(moves: &[u32]) -> Vec<(usize, usize)> {
    let mut holds: Vec<usize> = (0..moves.len()).collect();
    let mut made = Vec::new();
    for place in 0..moves.len() {
        // The qubit that is here goes home, and the one that was there comes here.
        while moves[holds[place]] as usize != place {
            let home = moves[holds[place]] as usize;
            made.push((place.min(home), place.max(home)));
            holds.swap(place, home);
        }
    }
    made
}

/// Passes that [`relabel`] makes.
pub fn passes(moves: &[u32]) -> u64 {
    trades(moves).len() as u64
}

/// Moves qubit q to `moves[q]`, a permutation of the qubits of the state.
///
/// # Errors
/// A stop on request, after which the state is that of the finished trades.
pub fn relabel<T: Real>(state: &mut [Complex<T>], moves: &[u32], control: &Control) -> Result<()> {
    for (low, high) in trades(moves) {
        trade(state, low, high);
        control.pass_done()?;
    }
    Ok(())
}

fn trade<T: Real>(state: &mut [Complex<T>], low: usize, high: usize) {
    let (near, far) = (1usize << low, 1usize << high);
    for piece in state.chunks_exact_mut(2 * far) {
        let (clear, set) = piece.split_at_mut(far);
        for (from, to) in clear.chunks_exact_mut(2 * near).zip(set.chunks_exact_mut(2 * near)) {
            from[near..].swap_with_slice(&mut to[..near]);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_permutation_of_four_qubits_moves_each_index_to_its_place() {
        for code in 0..256u32 {
            let moves: Vec<u32> = (0..4).map(|q| code >> (2 * q) & 3).collect();
            if (0..4).any(|q| !moves.contains(&q)) {
                continue;
            }
            let start: Vec<Complex<f64>> = (0..16).map(|k| Complex::new(f64::from(k), 0.0)).collect();
            let mut state = start.clone();
            relabel(&mut state, &moves, &Control::default()).unwrap();
            for (index, amplitude) in start.iter().enumerate() {
                let target = (0..4).fold(0, |to, q| to | (index >> q & 1) << moves[q]);
                assert_eq!(state[target], *amplitude, "{moves:?}");
            }
        }
    }
}
