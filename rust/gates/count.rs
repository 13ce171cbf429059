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
    /// Gates on more than two qubits, which only files have.
    pub larger: u64,
    /// One-qubit gates, rotations included.
    pub one_qubit: u64,
    /// Rotations whose angle is a multiple of π/2 as OpenQASM has it: Clifford gates.
    pub clifford_rotations: u64,
    /// Rotations whose angle is an odd multiple of π/4: a T gate and Clifford gates.
    pub t_rotations: u64,
    /// All other rotations.
    pub other_rotations: u64,
}

/// What has to be known of a gate to count it.
pub trait Counted {
    /// Calls `visit` for each qubit that the gate occupies.
    fn each_qubit(&self, visit: impl FnMut(usize));

    /// Adds the gate, `times` over.
    fn add_to(&self, counts: &mut Counts, times: u64);

    /// Layers that the gate takes.
    fn layers(&self) -> u64;

    /// Whether these are layers of gates on several qubits.
    fn joins(&self) -> bool;
}

impl Counted for Gate {
    fn each_qubit(&self, mut visit: impl FnMut(usize)) {
        let (first, second) = self.qubits();
        visit(usize::from(first));
        second.into_iter().for_each(|second| visit(usize::from(second)));
    }

    fn add_to(&self, counts: &mut Counts, times: u64) {
        let place = match self {
            Self::Cx(..) | Self::Cz(..) => &mut counts.controlled,
            Self::Swap(..) => &mut counts.swaps,
            Self::Zz(..) => &mut counts.zz,
            _ => &mut counts.one_qubit,
        };
        *place = place.saturating_add(times);
        if let Some(angle) = self.angle() {
            let place = counts.rotations(angle);
            *place = place.saturating_add(times);
        }
    }

    fn layers(&self) -> u64 {
        if matches!(self, Self::Swap(..)) { 3 } else { 1 }
    }

    fn joins(&self) -> bool {
        self.qubits().1.is_some()
    }
}

impl Counts {
    /// The count of rotations that a rotation by this angle belongs to, as OpenQASM has the angle.
    pub fn rotations(&mut self, angle: f64) -> &mut u64 {
        match eighth_turns(angle) {
            Some(count) if count % 2 == 0 => &mut self.clifford_rotations,
            Some(_) => &mut self.t_rotations,
            None => &mut self.other_rotations,
        }
    }

    /// Adds an item, `times` over.
    pub fn add_item<G: Counted>(&mut self, item: &Item<G>, times: u64) {
        match item {
            Item::Gate(gate) => gate.add_to(self, times),
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
    all: Clock,
    joining: Clock,
}

impl Counter {
    /// A counter for a device of `qubits` qubits. Repeats are followed until they recur, for up to `work` gates in all.
    pub fn new(qubits: usize, work: u64) -> Self {
        let clock = |joining| Clock { free_at: vec![0; qubits], joining, work };
        Self { counts: Counts::default(), all: clock(false), joining: clock(true) }
    }

    /// Takes the next item.
    pub fn add<G: Counted>(&mut self, item: &Item<G>) {
        self.counts.add_item(item, 1);
        self.all.add(item);
        self.joining.add(item);
    }

    /// Layers of gates, a swap being three, when each gate starts as soon as its qubits are free; None where repeats did
    /// not recur.
    pub fn depth(&self) -> Option<u64> {
        self.all.depth()
    }

    /// The same for gates on two or more qubits alone.
    pub fn two_qubit_depth(&self) -> Option<u64> {
        self.joining.depth()
    }
}

impl Sink for Counter {
    fn take(&mut self, item: Item) -> Result<()> {
        self.add(&item);
        Ok(())
    }
}

/// When each qubit becomes free.
struct Clock {
    free_at: Vec<u64>,
    /// Whether only gates on several qubits take time.
    joining: bool,
    work: u64,
}

impl Clock {
    fn add<G: Counted>(&mut self, item: &Item<G>) {
        schedule(item, &mut self.free_at, self.joining, &mut self.work);
    }

    fn depth(&self) -> Option<u64> {
        (self.work > 0).then(|| self.free_at.iter().copied().max().unwrap_or(0))
    }
}

fn schedule<G: Counted>(item: &Item<G>, free_at: &mut [u64], joining: bool, work: &mut u64) {
    match item {
        Item::Gate(gate) => {
            let mut end = 0;
            gate.each_qubit(|qubit| end = end.max(free_at[qubit]));
            let layers = if joining && !gate.joins() { 0 } else { gate.layers() };
            end = end.saturating_add(layers);
            gate.each_qubit(|qubit| free_at[qubit] = end);
        }
        Item::Loop(body) => {
            let parts = connected(&body.items, free_at.len());
            repeated(body.repeat, &parts, free_at, &mut |free_at| {
                *work = work.saturating_sub(body.items.len() as u64);
                // Without work left nothing moves, which recurs at once.
                if *work > 0 {
                    body.items.iter().for_each(|item| schedule(item, free_at, joining, work));
                }
            });
        }
    }
}

/// Sets of qubits that the gates of a body connect, two or more each, and single ones that it touches.
fn connected<G: Counted>(items: &[Item<G>], qubits: usize) -> Vec<Vec<usize>> {
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

fn join<G: Counted>(items: &[Item<G>], leader: &mut [usize], touched: &mut [bool]) {
    for item in items {
        match item {
            Item::Gate(gate) => {
                let mut first = None;
                gate.each_qubit(|qubit| {
                    touched[qubit] = true;
                    let other = find(leader, qubit);
                    let one = *first.get_or_insert(other);
                    leader[other] = one;
                });
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::gates::gate::Loop;

    fn chain(repeat: u64) -> Item {
        let items = (0..5).map(|qubit| Item::Gate(Gate::Cx(qubit, qubit + 1))).collect();
        Item::Loop(Box::new(Loop { repeat, items, qubits: (0..6).collect() }))
    }

    #[test]
    fn depth_is_given_up_where_repeats_take_too_much_work() {
        let depths = [9, 1000].map(|work| {
            let mut counter = Counter::new(6, work);
            counter.add(&chain(1 << 40));
            assert_eq!(counter.counts.controlled, 5 << 40);
            (counter.depth(), counter.two_qubit_depth())
        });
        let exact = 2 * ((1 << 40) - 1) + 5;
        assert_eq!(depths, [(None, None), (Some(exact), Some(exact))]);
    }
}
