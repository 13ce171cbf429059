//! Gates that undo each other go: between neighbours, past gates that commute, and at the seam of a repeated body.
//!
//! A new gate looks back along the gates on each of its qubits. It may pass a gate that looks the same there (both
//! functions of Z, or both of X: a controlled NOT is a function of Z on its control and of X on its target), and where it
//! meets its own inverse on all of its qubits, both vanish. Rotations never vanish and never change their order.
//!
//! Gates leave in order once `WINDOW` others have come after them, so that a circuit of any size streams through.
//!
//! A body that runs r times is g M g⁻¹ where its first gate undoes its last, and (g M g⁻¹)^r = g M^r g⁻¹: such gates move
//! out of the loop, where they meet what is around it.

use std::collections::VecDeque;

use super::gate::{Axis, Gate, Item, Loop};
use crate::error::Result;

/// Gates that are kept back for cancelling.
const WINDOW: usize = 1 << 13;

/// How many gates a new one looks past on each qubit.
const LOOK_BACK: usize = 24;

/// Takes items in order of time.
pub trait Sink {
    /// Takes the next item.
    ///
    /// # Errors
    /// The caller asked to stop, or the item cannot be taken.
    fn take(&mut self, item: Item) -> Result<()>;
}

impl Sink for Vec<Item> {
    fn take(&mut self, item: Item) -> Result<()> {
        self.push(item);
        Ok(())
    }
}

/// A sink in front of another one, in which gates cancel.
pub struct Canceller<'a> {
    sink: &'a mut dyn Sink,
    kept: VecDeque<Option<Item>>,
    passed: u64,
    on_qubit: Vec<Vec<u64>>,
}

impl<'a> Canceller<'a> {
    /// Puts a canceller for `qubits` physical qubits in front of a sink.
    pub fn new(sink: &'a mut dyn Sink, qubits: usize) -> Self {
        Self { sink, kept: VecDeque::new(), passed: 0, on_qubit: vec![Vec::new(); qubits] }
    }

    /// Adds a gate, or drops it together with the one that it undoes.
    ///
    /// # Errors
    /// Those of the sink.
    pub fn gate(&mut self, gate: Gate) -> Result<()> {
        if gate.inverse().is_some()
            && let Some(place) = self.undone_by(gate)
        {
            self.kept[(place - self.passed) as usize] = None;
            let (first, second) = gate.qubits();
            for qubit in std::iter::once(first).chain(second) {
                let stack = &mut self.on_qubit[usize::from(qubit)];
                if let Some(depth) = stack.iter().rposition(|&entry| entry == place) {
                    stack.remove(depth);
                }
            }
            return Ok(());
        }
        self.put(Item::Gate(gate))
    }

    /// Adds a body that runs `repeat` times; what its ends undo moves out of it.
    ///
    /// # Errors
    /// Those of the sink.
    pub fn body(&mut self, repeat: u64, items: Vec<Item>) -> Result<()> {
        let (before, items) = without_ends(items, self.on_qubit.len());
        for &gate in &before {
            self.gate(gate)?;
        }
        if !items.is_empty() {
            let mut qubits = Vec::new();
            items.iter().for_each(|item| item.each_qubit(|qubit| qubits.push(qubit)));
            qubits.sort_unstable();
            qubits.dedup();
            self.put(Item::Loop(Box::new(Loop { repeat, items, qubits })))?;
        }
        for inverse in before.iter().rev().filter_map(|gate| gate.inverse()) {
            self.gate(inverse)?;
        }
        Ok(())
    }

    /// Passes on what is left.
    ///
    /// # Errors
    /// Those of the sink.
    pub fn finish(mut self) -> Result<()> {
        self.pass_on(self.kept.len())
    }

    fn put(&mut self, item: Item) -> Result<()> {
        let place = self.passed + self.kept.len() as u64;
        item.each_qubit(|qubit| self.on_qubit[usize::from(qubit)].push(place));
        self.kept.push_back(Some(item));
        if self.kept.len() >= 2 * WINDOW {
            self.pass_on(WINDOW)?;
            let passed = self.passed;
            for stack in &mut self.on_qubit {
                let gone = stack.partition_point(|&place| place < passed);
                stack.drain(..gone);
            }
        }
        Ok(())
    }

    fn pass_on(&mut self, count: usize) -> Result<()> {
        self.passed += count as u64;
        self.kept.drain(..count).flatten().try_for_each(|item| self.sink.take(item))
    }

    /// The place of the gate that a new one undoes.
    fn undone_by(&self, gate: Gate) -> Option<u64> {
        let (first, second) = gate.qubits();
        let place = self.reached(gate, first)?;
        match second {
            Some(second) if self.reached(gate, second) != Some(place) => None,
            _ => Some(place),
        }
    }

    /// The gate that a new one would undo, as seen along one qubit.
    fn reached(&self, gate: Gate, qubit: u16) -> Option<u64> {
        let axis = gate.axis(qubit);
        for &place in self.on_qubit[usize::from(qubit)].iter().rev().take(LOOK_BACK) {
            let Some(Item::Gate(before)) = &self.kept[(place - self.passed) as usize] else { return None };
            if gate.undoes(*before) {
                return Some(place);
            }
            if axis == Axis::Mixed || before.axis(qubit) != axis {
                return None;
            }
        }
        None
    }
}

/// Takes gates off the start of a body whose inverses stand at its end; returns them with what is left.
fn without_ends(items: Vec<Item>, qubits: usize) -> (Vec<Gate>, Vec<Item>) {
    let mut on_qubit: Vec<VecDeque<usize>> = vec![VecDeque::new(); qubits];
    for (place, item) in items.iter().enumerate() {
        item.each_qubit(|qubit| on_qubit[usize::from(qubit)].push_back(place));
    }
    let mut kept: Vec<Option<Item>> = items.into_iter().map(Some).collect();
    let mut before = Vec::new();
    let mut waiting: Vec<usize> = (0..qubits).rev().collect();
    while let Some(qubit) = waiting.pop() {
        let Some((gate, first, last)) = ends(&on_qubit, &kept, qubit) else { continue };
        (kept[first], kept[last]) = (None, None);
        let (one, other) = gate.qubits();
        for touched in std::iter::once(one).chain(other).map(usize::from) {
            on_qubit[touched].pop_front();
            on_qubit[touched].pop_back();
            waiting.push(touched);
        }
        before.push(gate);
    }
    (before, kept.into_iter().flatten().collect())
}

/// The first gate on a qubit, where it is first on all its qubits and undone by a gate that is last on all of them.
fn ends(on_qubit: &[VecDeque<usize>], kept: &[Option<Item>], qubit: usize) -> Option<(Gate, usize, usize)> {
    let (&first, &last) = (on_qubit[qubit].front()?, on_qubit[qubit].back()?);
    let (Some(Item::Gate(gate)), Some(Item::Gate(closing))) = (&kept[first], &kept[last]) else { return None };
    let (_, other) = gate.qubits();
    let whole = |stack: &VecDeque<usize>| stack.front() == Some(&first) && stack.back() == Some(&last);
    let (one, _) = gate.qubits();
    let free = whole(&on_qubit[usize::from(one)]) && other.is_none_or(|other| whole(&on_qubit[usize::from(other)]));
    (first != last && free && closing.undoes(*gate)).then_some((*gate, first, last))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn gates(run: impl FnOnce(&mut Canceller<'_>) -> Result<()>) -> Vec<Item> {
        let mut items = Vec::new();
        let mut out = Canceller::new(&mut items, 4);
        run(&mut out).unwrap();
        out.finish().unwrap();
        items
    }

    #[test]
    fn gates_cancel_past_those_that_commute_and_no_others() {
        let passing = [Gate::Cx(0, 2), Gate::Cx(3, 1), Gate::Rz(0, 0.1), Gate::Rx(1, 0.2), Gate::H(2)];
        let left = gates(|out| {
            out.gate(Gate::Cx(0, 1))?;
            passing.iter().try_for_each(|&gate| out.gate(gate))?;
            out.gate(Gate::Cx(0, 1))
        });
        assert_eq!(left, passing.map(Item::Gate));
        for blocking in
            [Gate::H(0), Gate::Rz(1, 0.1), Gate::Rx(0, 0.1), Gate::Cx(1, 0), Gate::Cz(0, 1), Gate::Swap(1, 2)]
        {
            let left =
                gates(|out| [Gate::Cx(0, 1), blocking, Gate::Cx(0, 1)].into_iter().try_for_each(|g| out.gate(g)));
            assert_eq!(left.len(), 3, "{blocking:?}");
        }
    }

    #[test]
    fn what_the_ends_of_a_body_undo_moves_out_and_meets_its_surroundings() {
        let body = [Gate::H(0), Gate::Cx(0, 1), Gate::Rz(1, 0.1), Gate::Cx(0, 1), Gate::H(0)].map(Item::Gate);
        let left = gates(|out| {
            out.gate(Gate::H(0))?;
            out.body(5, body.to_vec())?;
            out.gate(Gate::Cx(0, 1))
        });
        let inside = Loop { repeat: 5, items: vec![Item::Gate(Gate::Rz(1, 0.1))], qubits: vec![1] };
        let gate = |gate| Item::Gate(gate);
        assert_eq!(
            left,
            [
                gate(Gate::Cx(0, 1)),
                Item::Loop(Box::new(inside)),
                gate(Gate::Cx(0, 1)),
                gate(Gate::H(0)),
                gate(Gate::Cx(0, 1))
            ]
        );
    }

    #[test]
    fn a_long_stream_keeps_every_rotation() {
        let count = 5 * WINDOW;
        let left = gates(|out| {
            (0..count).try_for_each(|k| {
                [Gate::H(0), Gate::Rz(0, k as f64), Gate::H(0)].into_iter().try_for_each(|g| out.gate(g))
            })
        });
        let angles: Vec<f64> =
            left.iter().filter_map(|item| if let Item::Gate(gate) = item { gate.angle() } else { None }).collect();
        assert_eq!(angles, (0..count).map(|k| k as f64).collect::<Vec<_>>());
        assert_eq!(left.len(), count + 2);
    }
}
