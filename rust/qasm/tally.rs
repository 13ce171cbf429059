//! The gates of a file, counted as they stand there, while it is read.
//!
//! A gate of a library counts as one on its qubits, modifiers and controls included; a gate of the file counts by its body,
//! unless it is named as native: then it is one gate as well. A gate of the file with controls counts as its body with
//! these controls on every gate, as the standard defines it.
//!
//! Rotations are those of the product of rotations that a gate is: three for u3, two for crz, seven of T's kind for ccx.

use super::library::{Move, Standard, rotates, weighted};
use super::modifiers::{Applied, Product};
use super::registers::MOST_QUBITS;
use crate::gates::count::{self, Counter, Counts};
use crate::gates::gate::{Item, Loop};

/// Gates of repeated bodies that are followed for the depth before it is given up.
const WORK: u64 = 1 << 24;

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Kind {
    Gate,
    Swap,
    /// Takes no time, and lets nothing start before all before it has ended.
    Barrier,
}

/// A gate as it stands in a file.
#[derive(Clone, Copy, Debug)]
pub struct Called {
    kind: Kind,
    qubits: u128,
    /// Rotations that are Clifford, of T's kind, and others.
    rotations: [u64; 3],
}

impl count::Counted for Called {
    fn each_qubit(&self, mut visit: impl FnMut(usize)) {
        let mut left = self.qubits;
        while left != 0 {
            visit(left.trailing_zeros() as usize);
            left &= left - 1;
        }
    }

    fn add_to(&self, counts: &mut Counts, times: u64) {
        let place = match (self.kind, self.qubits.count_ones()) {
            (Kind::Barrier, _) => None,
            (Kind::Swap, _) => Some(&mut counts.swaps),
            (_, 0) => None,
            (_, 1) => Some(&mut counts.one_qubit),
            (_, 2) => Some(&mut counts.controlled),
            _ => Some(&mut counts.larger),
        };
        if let Some(place) = place {
            *place = place.saturating_add(times);
        }
        let places = [&mut counts.clifford_rotations, &mut counts.t_rotations, &mut counts.other_rotations];
        for (place, count) in places.into_iter().zip(self.rotations) {
            *place = place.saturating_add(count.saturating_mul(times));
        }
    }

    fn layers(&self) -> u64 {
        match self.kind {
            Kind::Gate => 1,
            Kind::Swap => 3,
            Kind::Barrier => 0,
        }
    }

    fn joins(&self) -> bool {
        self.qubits.count_ones() > 1
    }
}

/// What was counted; depths are None where repeats did not recur soon.
#[derive(Clone, Copy, Debug)]
pub struct Counted {
    /// Two-qubit gates are among its `controlled`, native ones included.
    pub counts: Counts,
    /// Layers of gates.
    pub depth: Option<u64>,
    /// Layers of gates on two or more qubits.
    pub two_qubit_depth: Option<u64>,
}

/// Gates in order of time.
type Body = Vec<Item<Called>>;

/// Counts gates, and gathers those of bodies that are not closed yet.
pub struct Tally {
    /// Whether gates belong to what is counted.
    pub counts: bool,
    counter: Counter,
    open: Vec<Body>,
}

impl Default for Tally {
    fn default() -> Self {
        Self { counts: false, counter: Counter::new(MOST_QUBITS as usize, WORK), open: vec![] }
    }
}

impl Tally {
    /// From here on gates go into a body.
    pub fn open(&mut self) {
        self.open.push(vec![]);
    }

    /// The gates since the body was opened.
    pub fn close(&mut self) -> Body {
        self.open.pop().unwrap_or_default()
    }

    pub fn total(&self) -> Counted {
        let counter = &self.counter;
        Counted { counts: counter.counts, depth: counter.depth(), two_qubit_depth: counter.two_qubit_depth() }
    }

    fn take(&mut self, item: Item<Called>) {
        match self.open.last_mut() {
            Some(body) => body.push(item),
            None if self.counts => self.counter.add(&item),
            None => {}
        }
    }

    /// A gate of a library.
    pub fn standard(&mut self, gate: &Standard, parameters: &[f64], on: &[u32]) {
        let mut counts = Counts::default();
        for step in gate.moves {
            if let Move::Angle(_, _, weights) = step
                && rotates(weights, parameters)
            {
                // exp(-i θ P) is a rotation by 2θ.
                *counts.rotations(2.0 * weighted(weights, parameters)) += 1;
            }
        }
        self.take(Item::Gate(Called { kind: kind(gate.name), qubits: mask(on), rotations: rotations(&counts) }));
    }

    /// A gate of the file that counts as one, and its body.
    pub fn native(&mut self, name: &str, body: &[Item<Called>], on: &[u32]) {
        let kind = if on.len() == 2 { kind(name) } else { Kind::Gate };
        self.take(Item::Gate(Called { kind, qubits: mask(on), rotations: rotations(&total(body)) }));
    }

    pub fn barrier(&mut self, on: impl Iterator<Item = u32>) {
        let qubits = on.fold(0, |all, qubit| all | 1u128 << qubit);
        self.take(Item::Gate(Called { kind: Kind::Barrier, qubits, rotations: [0; 3] }));
    }

    /// A body that runs several times.
    pub fn repeat(&mut self, body: Body, repeat: u64) {
        repeated(body, repeat).into_iter().for_each(|item| self.take(item));
    }

    /// A gate with modifiers: `by` acts on its body, None where all of it counts as one gate. `product` is what it is.
    pub fn modified(&mut self, mut body: Body, by: Option<&[Applied]>, product: &Product, on: &[u32], undo: bool) {
        let mut counts = Counts::default();
        for rotation in &product.list {
            *counts.rotations(2.0 * rotation.angle) += 1;
        }
        // Clifford rotations of the product are mostly its Clifford gates.
        counts.clifford_rotations = 0;
        let whole = |rotations| Called { kind: Kind::Gate, qubits: mask(on), rotations };
        let Some(by) = by else { return self.take(Item::Gate(whole(rotations(&counts)))) };
        if by.iter().any(|modifier| matches!(modifier, Applied::Power(_, false))) {
            // A root is no repeat of the body.
            return self.take(Item::Gate(whole(rotations(&counts))));
        }
        let mut width = on.len() as u32 - super::modifiers::controls(by) as u32;
        let mut controlled = false;
        for modifier in by.iter().rev() {
            match *modifier {
                Applied::Inverse => reverse(&mut body),
                Applied::Power(exponent, _) => {
                    if exponent < 0.0 {
                        reverse(&mut body);
                    }
                    body = repeated(body, exponent.abs() as u64);
                }
                // A new control is qubit 0, and the others move up.
                Applied::Controls(count, _) => {
                    let moved = move |called: Called| match called.kind {
                        Kind::Barrier => Called { qubits: shifted(called.qubits, count), ..called },
                        _ => Called {
                            kind: Kind::Gate,
                            qubits: shifted(called.qubits, count) | shifted_ones(count),
                            rotations: [0; 3],
                        },
                    };
                    body = mapped(body, &moved);
                    controlled = true;
                    width += count;
                }
            }
        }
        debug_assert_eq!(width as usize, on.len());
        if undo {
            reverse(&mut body);
        }
        let place = |called: Called| {
            let mut qubits = 0;
            count::Counted::each_qubit(&called, |qubit| qubits |= 1u128 << on[qubit]);
            Called { qubits, ..called }
        };
        mapped(body, &place).into_iter().for_each(|item| self.take(item));
        if controlled {
            self.take(Item::Gate(Called { kind: Kind::Barrier, qubits: 0, rotations: rotations(&counts) }));
        }
    }
}

fn kind(name: &str) -> Kind {
    if name == "swap" { Kind::Swap } else { Kind::Gate }
}

fn mask(on: &[u32]) -> u128 {
    on.iter().fold(0, |all, &qubit| all | 1 << qubit)
}

fn shifted(qubits: u128, by: u32) -> u128 {
    qubits.checked_shl(by).unwrap_or(0)
}

fn shifted_ones(count: u32) -> u128 {
    1u128.checked_shl(count).unwrap_or(0).wrapping_sub(1)
}

fn rotations(counts: &Counts) -> [u64; 3] {
    [counts.clifford_rotations, counts.t_rotations, counts.other_rotations]
}

fn total(body: &[Item<Called>]) -> Counts {
    let mut counts = Counts::default();
    body.iter().for_each(|item| counts.add_item(item, 1));
    counts
}

fn repeated(items: Body, repeat: u64) -> Body {
    if repeat == 0 || items.is_empty() {
        return vec![];
    }
    if repeat == 1 {
        return items;
    }
    let mut touched = 0u128;
    items.iter().for_each(|item| touched |= qubits_of(item));
    let qubits = (0..MOST_QUBITS as u16).filter(|&qubit| touched >> qubit & 1 == 1).collect();
    vec![Item::Loop(Box::new(Loop { repeat, items, qubits }))]
}

fn qubits_of(item: &Item<Called>) -> u128 {
    match item {
        Item::Gate(called) => called.qubits,
        Item::Loop(body) => body.qubits.iter().fold(0, |all, &qubit| all | 1 << qubit),
    }
}

fn reverse(items: &mut [Item<Called>]) {
    items.reverse();
    for item in items {
        if let Item::Loop(body) = item {
            reverse(&mut body.items);
        }
    }
}

fn mapped(items: Body, with: &dyn Fn(Called) -> Called) -> Body {
    let each = |item| match item {
        Item::Gate(called) => vec![Item::Gate(with(called))],
        Item::Loop(body) => repeated(mapped(body.items, with), body.repeat),
    };
    items.into_iter().flat_map(each).collect()
}
