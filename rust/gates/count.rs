//! What a circuit costs as gates, repeats multiplied out.

use super::cancel::Sink;
use super::gate::{Gate, Item};
use crate::cost::repeated;
use crate::error::Result;

/// Counts of gates, saturating.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Counts {
    /// Controlled NOTs or controlled Zs, without those in swaps.
    pub controlled: u64,
    /// Native exp(-i θ Z Z).
    pub zz: u64,
    /// Swaps, each three two-qubit gates.
    pub swaps: u64,
    /// One-qubit gates, rotations included.
    pub one_qubit: u64,
    /// Rotations whose angle is a multiple of π/2 as OpenQASM has it: Clifford gates.
    pub clifford_rotations: u64,
    /// Rotations whose angle is an odd multiple of π/4: a T gate and Clifford gates.
    pub t_rotations: u64,
    /// All other rotations.
    pub other_rotations: u64,
}

impl Counts {
    fn add(&mut self, gate: Gate, times: u64) {
        let place = match gate {
            Gate::Cx(..) | Gate::Cz(..) => &mut self.controlled,
            Gate::Swap(..) => &mut self.swaps,
            Gate::Zz(..) => &mut self.zz,
            _ => &mut self.one_qubit,
        };
        *place = place.saturating_add(times);
        if let Some(angle) = gate.angle() {
            let place = match eighth_turns(angle) {
                Some(count) if count % 2 == 0 => &mut self.clifford_rotations,
                Some(_) => &mut self.t_rotations,
                None => &mut self.other_rotations,
            };
            *place = place.saturating_add(times);
        }
    }

    fn add_item(&mut self, item: &Item, times: u64) {
        match item {
            Item::Gate(gate) => self.add(*gate, times),
            Item::Loop(body) => {
                let times = times.saturating_mul(body.repeat);
                body.items.iter().for_each(|item| self.add_item(item, times));
            }
        }
    }
}

/// How many times π/4 an angle is: a whole number within 16 roundings, or None.
///
/// A rounded multiple of a rounded π is off by no more; the error, below 2e-15 of the angle, is far below any synthesis.
fn eighth_turns(angle: f64) -> Option<u64> {
    let turns = angle / std::f64::consts::FRAC_PI_4;
    let nearest = turns.round();
    let near = nearest.abs() < 1e6 && (turns - nearest).abs() <= 8.0 * f64::EPSILON * nearest.abs();
    near.then_some(nearest.abs() as u64)
}

/// A sink that counts gates and follows the depth.
pub struct Counter {
    /// The counts so far.
    pub counts: Counts,
    depth: Vec<u64>,
    two_qubit_depth: Vec<u64>,
}

impl Counter {
    /// A counter for a device of `qubits` qubits.
    pub fn new(qubits: usize) -> Self {
        Self { counts: Counts::default(), depth: vec![0; qubits], two_qubit_depth: vec![0; qubits] }
    }

    /// Layers of gates, a swap being three, when each gate starts as soon as its qubits are free.
    pub fn depth(&self) -> u64 {
        self.depth.iter().copied().max().unwrap_or(0)
    }

    /// The same for two-qubit gates alone.
    pub fn two_qubit_depth(&self) -> u64 {
        self.two_qubit_depth.iter().copied().max().unwrap_or(0)
    }
}

impl Sink for Counter {
    fn take(&mut self, item: Item) -> Result<()> {
        self.counts.add_item(&item, 1);
        schedule(&item, &mut self.depth, one_for_each);
        schedule(&item, &mut self.two_qubit_depth, none_for_one_qubit);
        Ok(())
    }
}

fn one_for_each(gate: Gate) -> u64 {
    if matches!(gate, Gate::Swap(..)) { 3 } else { 1 }
}

fn none_for_one_qubit(gate: Gate) -> u64 {
    if gate.qubits().1.is_some() { one_for_each(gate) } else { 0 }
}

fn schedule(item: &Item, free_at: &mut [u64], duration: fn(Gate) -> u64) {
    match item {
        Item::Gate(gate) => {
            let (first, second) = gate.qubits();
            let (first, second) = (usize::from(first), usize::from(second.unwrap_or(first)));
            let end = free_at[first].max(free_at[second]).saturating_add(duration(*gate));
            if duration(*gate) > 0 {
                (free_at[first], free_at[second]) = (end, end);
            }
        }
        Item::Loop(body) => {
            let parts = connected(&body.items, free_at.len());
            repeated(body.repeat, &parts, free_at, &mut |free_at| {
                body.items.iter().for_each(|item| schedule(item, free_at, duration));
            });
        }
    }
}

/// Sets of qubits that the gates of a body connect, two or more each, and single ones that it touches.
fn connected(items: &[Item], qubits: usize) -> Vec<Vec<usize>> {
    let mut leader: Vec<usize> = (0..qubits).collect();
    let mut touched = vec![false; qubits];
    join(items, &mut leader, &mut touched);
    let mut parts: Vec<Vec<usize>> = vec![Vec::new(); qubits];
    for qubit in (0..qubits).filter(|&qubit| touched[qubit]) {
        parts[find(&mut leader, qubit)].push(qubit);
    }
    parts.retain(|part| !part.is_empty());
    parts
}

fn join(items: &[Item], leader: &mut [usize], touched: &mut [bool]) {
    for item in items {
        match item {
            Item::Gate(gate) => {
                let (first, second) = gate.qubits();
                let one = find(leader, usize::from(first));
                touched[usize::from(first)] = true;
                if let Some(second) = second {
                    let other = find(leader, usize::from(second));
                    touched[usize::from(second)] = true;
                    leader[other] = one;
                }
            }
            Item::Loop(body) => join(&body.items, leader, touched),
        }
    }
}

fn find(leader: &mut [usize], qubit: usize) -> usize {
    let mut now = qubit;
    while leader[now] != now {
        leader[now] = leader[leader[now]];
        now = leader[now];
    }
    now
}
