//! What a circuit costs in two-qubit gates, counted without writing it out.

use std::collections::VecDeque;

use crate::rotations::{Block, Body, Rotation, Rotations};

/// Two-qubit gates: 2(w-1) for a rotation of weight w, one ladder down and one up; those of a frame's Clifford included, while
/// its relabelling takes none.
pub fn two_qubit_gates(rotations: &Rotations) -> u64 {
    let mut sum: u64 = rotations.frame().map_or(0, |frame| frame.rotations().iter().map(ladder_gates).sum());
    rotations.for_each_list(&mut |list, times| {
        let once: u64 = list.iter().map(ladder_gates).sum();
        sum = sum.saturating_add(once.saturating_mul(times));
    });
    sum
}

fn ladder_gates(rotation: &Rotation) -> u64 {
    2 * u64::from(rotation.string.weight().saturating_sub(1))
}

/// Depth in two-qubit gates when each rotation starts as soon as all its qubits are free.
///
/// A rotation of weight w occupies its qubits for 2(w-1) gates in a row (a ladder of nearest neighbours), so rotations on
/// disjoint qubits run side by side. One run of a block maps the times at which its qubits become free by maxima and sums
/// only; once some earlier times recur, shifted by one constant in each connected part of the block, they recur for good.
/// So a repeated block is run until that happens and the rest is multiplied out: a million steps cost what a few do.
pub fn depth(rotations: &Rotations) -> u64 {
    let mut free_at = vec![0u64; rotations.qubits() as usize];
    advance(rotations.blocks(), &mut free_at);
    let last = rotations.frame().map_or(vec![], |frame| frame.rotations());
    last.iter().for_each(|rotation| schedule(rotation, &mut free_at));
    free_at.into_iter().max().unwrap_or(0)
}

/// How many runs back a recurrence is looked for: as many as there are qubits, at least so many.
const LEAST_PERIODS: usize = 12;

fn advance(blocks: &[Block], free_at: &mut [u64]) {
    for block in blocks {
        let parts = if block.repeat > 1 { connected_parts(block) } else { vec![] };
        repeated(block.repeat, &parts, free_at, &mut |free_at| match &block.body {
            Body::List(list) => list.iter().for_each(|rotation| schedule(rotation, free_at)),
            Body::Nested(blocks) => advance(blocks, free_at),
        });
    }
}

/// Runs something `repeat` times on the times at which qubits become free; see [`depth`].
///
/// `parts` are the sets of qubits that one run connects; outside of them it changes nothing.
pub(crate) fn repeated(repeat: u64, parts: &[Vec<usize>], free_at: &mut [u64], run: &mut dyn FnMut(&mut [u64])) {
    let longest = free_at.len().max(LEAST_PERIODS);
    let mut history: VecDeque<Vec<u64>> = VecDeque::new();
    let mut left = repeat;
    while left > 0 {
        if repeat > 1 {
            history.truncate(longest - 1);
            history.push_front(free_at.to_vec());
        }
        run(free_at);
        left -= 1;
        let recent = history.iter().enumerate();
        let period = recent.map(|(back, was)| (back as u64 + 1, was)).find(|(_, was)| recurs(free_at, was, parts));
        if let Some((period, was)) = period.filter(|(period, _)| left >= *period) {
            for (now, was) in free_at.iter_mut().zip(was) {
                *now = now.saturating_add((*now - was).saturating_mul(left / period));
            }
            left %= period;
            history.clear();
        }
    }
}

fn schedule(rotation: &Rotation, free_at: &mut [u64]) {
    let gates = ladder_gates(rotation);
    if gates == 0 {
        return;
    }
    let support = rotation.string.support();
    let on = |qubit: &usize| support >> qubit & 1 == 1;
    let start = (0..free_at.len()).filter(on).map(|qubit| free_at[qubit]).max().unwrap_or(0);
    (0..free_at.len()).filter(on).for_each(|qubit| free_at[qubit] = start.saturating_add(gates));
}

/// Whether the times are earlier ones shifted by one constant in each part.
fn recurs(now: &[u64], was: &[u64], parts: &[Vec<usize>]) -> bool {
    parts.iter().all(|part| {
        let mut shifts = part.iter().map(|&qubit| now[qubit] - was[qubit]);
        let first = shifts.next();
        shifts.all(|shift| Some(shift) == first)
    })
}

/// Sets of qubits that the block's ladders connect.
fn connected_parts(block: &Block) -> Vec<Vec<usize>> {
    let mut parts: Vec<u128> = Vec::new();
    let mut join = |list: &[Rotation]| {
        for rotation in list.iter().filter(|rotation| ladder_gates(rotation) > 0) {
            let (touched, mut apart): (Vec<u128>, Vec<u128>) =
                parts.iter().partition(|&part| part & rotation.string.support() != 0);
            apart.push(touched.into_iter().fold(rotation.string.support(), |all, part| all | part));
            parts = apart;
        }
    };
    match &block.body {
        Body::List(list) => join(list),
        Body::Nested(blocks) => crate::rotations::visit_lists(blocks, 1, &mut |list, _| join(list)),
    }
    parts.into_iter().map(|part| (0..128).filter(|qubit| part >> qubit & 1 == 1).collect()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::pauli::PauliString;

    fn circuit(masks: &[u128]) -> Rotations {
        let list = masks.iter().map(|&x| Rotation { string: PauliString { x, z: 0 }, angle: 0.1 }).collect();
        Rotations::from_list(8, list, 0.0).unwrap()
    }

    #[test]
    fn gates_are_two_for_each_qubit_after_the_first() {
        assert_eq!(two_qubit_gates(&circuit(&[0b1, 0b11, 0b111]).times(5).unwrap()), 5 * (2 + 4));
    }

    #[test]
    fn disjoint_rotations_run_side_by_side() {
        assert_eq!(depth(&circuit(&[0b11, 0b1100, 0b11_0000])), 2);
        assert_eq!(depth(&circuit(&[0b11, 0b110])), 4);
    }

    #[test]
    fn repeats_are_multiplied_out_exactly() {
        for masks in
            [&[0b11, 0b110, 0b1100, 0b111][..], &[0b11, 0b1_1000, 0b11, 0b110], &[0b11, 0b11_0000, 0b1100_0011]]
        {
            let once = circuit(masks);
            for repeat in [1u64, 2, 3, 7, 20, 41] {
                let written = (1..repeat).fold(once.clone(), |all, _| all.then(&once).unwrap());
                assert_eq!(depth(&once.times(repeat).unwrap()), depth(&written), "{masks:?} {repeat}");
            }
            assert!(depth(&once.times(1 << 40).unwrap()) >= 1 << 40);
        }
    }
}
