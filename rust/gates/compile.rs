//! From rotations to gates, one after the other; repeated blocks stay repeated.

use std::collections::HashMap;

use super::cancel::{Canceller, Sink};
use super::device::{Device, Layout};
use super::gate::{Gate, Item};
use super::ladder::{Gathering, Shape, along, anywhere, controlled_not_along};
use super::pair::{Role, groups, letter, renaming};
use crate::clifford::Turn;
use crate::error::{Error, Result};
use crate::frame::Frame;
use crate::pauli::PauliString;
use crate::rotations::{Block, Body, Rotation, Rotations};
use crate::terms::Check;

/// Rotations between two looks for a request to stop.
const LOOK: usize = 1 << 12;

/// The order in which a ladder takes its qubits.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Order {
    /// By number.
    Ascending,
    /// Those with Z, then X, then Y, each by number.
    ZFirst,
}

/// The two-qubit gate of a device.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Native {
    /// Controlled NOT.
    Cx,
    /// Controlled Z.
    Cz,
    /// Controlled NOT, and exp(-i θ Z Z) for any θ.
    Zz,
}

/// How gates on qubits that are not joined come about.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Routing {
    /// Ladders run over the qubits between.
    Bridges,
    /// Qubits move by swaps.
    Swaps,
}

/// What circuits are written for.
#[derive(Clone, Debug)]
pub struct Options {
    /// How ladders are built.
    pub shape: Shape,
    /// In which order they take their qubits.
    pub order: Order,
    /// Whether commuting strings on a pair share gates.
    pub join: bool,
    /// The two-qubit gate.
    pub native: Native,
    /// Number of physical qubits.
    pub qubits: usize,
    /// Which are joined; None for all.
    pub device: Option<Device>,
    /// What is done about those that are not.
    pub routing: Routing,
    /// Where the logical qubits start.
    pub layout: Layout,
}

impl Options {
    /// Whether every qubit is where its number says and all are joined, so that no layout need be stated.
    fn in_place(&self) -> bool {
        let itself = |(qubit, &place): (usize, &u16)| qubit == usize::from(place);
        self.device.is_none()
            && self.layout.physical.len() == self.qubits
            && self.layout.physical.iter().enumerate().all(itself)
    }
}

/// Writes a circuit as gates into a sink and returns where the logical qubits end.
///
/// # Errors
/// An angle whose double is not a float, those of the sink, a request to stop.
pub fn compile(circuit: &Rotations, options: &Options, sink: &mut dyn Sink, check: Check<'_>) -> Result<Layout> {
    let mut compiler = Compiler {
        options,
        logical: circuit.qubits(),
        layout: options.layout.clone(),
        gatherings: HashMap::new(),
        check,
    };
    let mut out = Canceller::new(sink, options.qubits);
    compiler.blocks(circuit.blocks(), &mut out)?;
    if let Some(frame) = circuit.frame() {
        compiler.frame(frame, &mut out)?;
    }
    out.finish()?;
    Ok(compiler.layout)
}

/// Gatherings kept for reuse, at most.
const KEPT: usize = 1 << 16;

struct Compiler<'a> {
    options: &'a Options,
    logical: u32,
    layout: Layout,
    /// By support, where qubits never move.
    gatherings: HashMap<(u128, u128), Gathering>,
    check: Check<'a>,
}

impl Compiler<'_> {
    fn blocks(&mut self, blocks: &[Block], out: &mut Canceller<'_>) -> Result<()> {
        for block in blocks {
            if block.repeat == 1 {
                self.body(&block.body, out)?;
                continue;
            }
            let mut items: Vec<Item> = Vec::new();
            let mut inner = Canceller::new(&mut items, self.options.qubits);
            let start = self.layout.clone();
            self.body(&block.body, &mut inner)?;
            self.return_to(&start, &mut inner)?;
            inner.finish()?;
            out.body(block.repeat, items)?;
        }
        Ok(())
    }

    fn body(&mut self, body: &Body, out: &mut Canceller<'_>) -> Result<()> {
        match body {
            Body::List(list) => self.list(list, out),
            Body::Nested(blocks) => self.blocks(blocks, out),
        }
    }

    /// Brings every qubit back to where it was at the start of a repeated body.
    fn return_to(&mut self, start: &Layout, out: &mut Canceller<'_>) -> Result<()> {
        if let Some(device) = &self.options.device {
            for (a, b) in device.swaps_home(&self.layout.homes(start))? {
                self.swap(a, b, out)?;
            }
        }
        Ok(())
    }

    fn list(&mut self, list: &[Rotation], out: &mut Canceller<'_>) -> Result<()> {
        // A native exp(-i θ Z Z) is one gate for each string anyway.
        let join = self.options.join && self.options.native != Native::Zz;
        let roles = if join { groups(list, self.logical) } else { Vec::new() };
        for (place, rotation) in list.iter().enumerate() {
            if place % LOOK == 0 {
                (self.check)()?;
            }
            match roles.get(place) {
                Some(role) if role.before.is_some() || role.after.is_some() => {
                    self.member(list, place, *role, &roles, out)
                }
                _ => self.alone(rotation, out),
            }?;
        }
        Ok(())
    }

    fn alone(&mut self, rotation: &Rotation, out: &mut Canceller<'_>) -> Result<()> {
        let string = rotation.string;
        let angle = doubled(rotation.angle)?;
        if string.weight() != 1 {
            return self.around(string, out, |root, partner| match partner {
                Some(partner) => vec![Gate::Zz(partner, root, angle)],
                None => vec![Gate::Rz(root, angle)],
            });
        }
        let qubit = string.support().trailing_zeros();
        let at = self.layout.physical[qubit as usize];
        out.gate(match letter(string, qubit) {
            1 => Gate::Rx(at, angle),
            2 => Gate::Ry(at, angle),
            _ => Gate::Rz(at, angle),
        })
    }

    /// Gates between a ladder and its inverse; `centre` gets the qubit with the parity, and where the device has a native
    /// exp(-i θ Z Z), the last rung's other end instead of that rung. The identity is a global phase: no gates.
    fn around(
        &mut self,
        string: PauliString,
        out: &mut Canceller<'_>,
        centre: impl FnOnce(u16, Option<u16>) -> Vec<Gate>,
    ) -> Result<()> {
        let mut qubits: Vec<u32> = (0..self.logical).filter(|qubit| string.support() >> qubit & 1 == 1).collect();
        if qubits.is_empty() {
            return Ok(());
        }
        if self.options.order == Order::ZFirst {
            qubits.sort_by_key(|&qubit| [0u8, 1, 2, 0][usize::from(letter(string, qubit))]);
        }
        let Gathering { mut rungs, root } = self.gathering((string.x, string.z), &qubits, out)?;
        let partner = if self.options.native == Native::Zz { rungs.pop().map(|(control, _)| control) } else { None };
        let bases: Vec<Gate> = qubits.iter().flat_map(|&qubit| self.basis(string, qubit)).collect();
        bases.iter().try_for_each(|&gate| out.gate(gate))?;
        rungs.iter().try_for_each(|&(control, target)| self.cx(control, target, out))?;
        centre(root, partner).into_iter().try_for_each(|gate| out.gate(gate))?;
        rungs.iter().rev().try_for_each(|&(control, target)| self.cx(control, target, out))?;
        bases.iter().rev().filter_map(|gate| gate.inverse()).try_for_each(|gate| out.gate(gate))
    }

    /// Gates after which the string has Z on the qubit: V† Z V = X for V = H, and Y for V = H S†.
    fn basis(&self, string: PauliString, qubit: u32) -> Vec<Gate> {
        let at = self.layout.physical[qubit as usize];
        match letter(string, qubit) {
            1 => vec![Gate::H(at)],
            2 => vec![Gate::Sdg(at), Gate::H(at)],
            _ => vec![],
        }
    }

    /// The Clifford that follows the rotations, and the relabelling: swaps where the file is about logical qubits, a change
    /// of the layout where it is about physical ones.
    fn frame(&mut self, frame: &Frame, out: &mut Canceller<'_>) -> Result<()> {
        for &Turn { string, turns } in frame.turns() {
            // exp(-i t π/4 Z) is S^t up to a phase, on two qubits with a controlled NOT around it.
            self.around(string, out, |root, partner| {
                let inner = match turns % 4 {
                    0 => vec![],
                    1 => vec![Gate::S(root)],
                    2 => vec![Gate::S(root); 2],
                    _ => vec![Gate::Sdg(root)],
                };
                let rung = partner.map(|control| Gate::Cx(control, root));
                rung.into_iter().chain(inner).chain(rung).collect()
            })?;
        }
        let moves = frame.relabelling();
        if self.options.in_place() {
            let mut homes = moves.to_vec();
            for place in 0..homes.len() {
                while homes[place] as usize != place {
                    let home = homes[place] as usize;
                    homes.swap(place, home);
                    out.gate(Gate::Swap(place as u16, home as u16))?;
                }
            }
            return Ok(());
        }
        let mut physical = self.layout.physical.clone();
        for (qubit, &target) in moves.iter().enumerate() {
            physical[target as usize] = self.layout.physical[qubit];
        }
        self.layout = Layout::new(physical, self.options.qubits);
        Ok(())
    }

    fn gathering(&mut self, key: (u128, u128), qubits: &[u32], out: &mut Canceller<'_>) -> Result<Gathering> {
        let Some(device) = &self.options.device else {
            return Ok(anywhere(self.options.shape, &self.places(qubits)));
        };
        if self.options.routing == Routing::Swaps {
            self.bring_together(device, qubits, out)?;
            return along(device, self.options.shape, &self.places(qubits));
        }
        // Which qubits carry Z, X, Y matters only to the order; without it the support is the key.
        let key = if self.options.order == Order::Ascending { (key.0 | key.1, 0) } else { key };
        if let Some(known) = self.gatherings.get(&key) {
            return Ok(known.clone());
        }
        let made = along(device, self.options.shape, &self.places(qubits))?;
        if self.gatherings.len() < KEPT {
            self.gatherings.insert(key, made.clone());
        }
        Ok(made)
    }

    fn places(&self, qubits: &[u32]) -> Vec<u16> {
        qubits.iter().map(|&qubit| self.layout.physical[qubit as usize]).collect()
    }

    /// Moves logical qubits by swaps until they are connected: each in turn, the nearest first, to those that are.
    fn bring_together(&mut self, device: &Device, qubits: &[u32], out: &mut Canceller<'_>) -> Result<()> {
        let middle = qubits.len() / 2;
        let mut together = vec![self.layout.physical[qubits[middle] as usize]];
        let mut left: Vec<u32> =
            qubits.iter().enumerate().filter(|(place, _)| *place != middle).map(|(_, &q)| q).collect();
        while !left.is_empty() {
            let waiting = self.places(&left);
            let path = device.path(&together, |place| waiting.contains(&place))?;
            for step in path[1..].windows(2).rev() {
                self.swap(step[1], step[0], out)?;
            }
            together.push(path[1]);
            left.retain(|&qubit| self.layout.physical[qubit as usize] != path[1]);
        }
        Ok(())
    }

    fn swap(&mut self, a: u16, b: u16, out: &mut Canceller<'_>) -> Result<()> {
        self.layout.swap(a, b);
        out.gate(Gate::Swap(a, b))
    }

    /// A controlled NOT of two physical qubits that are joined.
    fn cx(&self, control: u16, target: u16, out: &mut Canceller<'_>) -> Result<()> {
        if self.options.native != Native::Cz {
            return out.gate(Gate::Cx(control, target));
        }
        [Gate::H(target), Gate::Cz(control, target), Gate::H(target)].into_iter().try_for_each(|gate| out.gate(gate))
    }

    /// A controlled NOT of two logical qubits, wherever they are.
    fn logical_cx(&mut self, control: u32, target: u32, out: &mut Canceller<'_>) -> Result<()> {
        let ends = |layout: &Layout| (layout.physical[control as usize], layout.physical[target as usize]);
        let (mut from, mut to) = ends(&self.layout);
        if let Some(device) = self.options.device.as_ref().filter(|device| !device.joins(from, to)) {
            if self.options.routing == Routing::Bridges {
                let path = device.path(&[from], |place| place == to)?;
                return controlled_not_along(&path).into_iter().try_for_each(|(a, b)| self.cx(a, b, out));
            }
            self.bring_together(device, &[control, target], out)?;
            (from, to) = ends(&self.layout);
        }
        self.cx(from, to, out)
    }

    /// One member of a group on a pair; the first opens it, the last closes it. See [`super::pair`].
    fn member(
        &mut self,
        list: &[Rotation],
        place: usize,
        role: Role,
        roles: &[Role],
        out: &mut Canceller<'_>,
    ) -> Result<()> {
        let mut first = place;
        let mut number = 0;
        while let Some(before) = roles[first].before {
            first = before as usize;
            number += 1;
        }
        let Some(second) = roles[first].after else { return self.alone(&list[place], out) };
        let (one, other) = (list[first].string, list[second as usize].string);
        let support = one.support();
        let (a, b) = (support.trailing_zeros(), 127 - support.leading_zeros());
        let at = |layout: &Layout| (layout.physical[a as usize], layout.physical[b as usize]);
        let (pa, pb) = at(&self.layout);
        let (_, signs_a) = renaming(letter(one, a), letter(other, a), pa);
        let (_, signs_b) = renaming(letter(one, b), letter(other, b), pb);
        let angle = doubled(list[place].angle)? * signs_a[number] * signs_b[number];
        match number {
            0 => {
                let (gates_a, _) = renaming(letter(one, a), letter(other, a), pa);
                let (gates_b, _) = renaming(letter(one, b), letter(other, b), pb);
                gates_a.into_iter().chain(gates_b).try_for_each(|gate| out.gate(gate))?;
                self.logical_cx(a, b, out)?;
                out.gate(Gate::Rz(at(&self.layout).1, angle))?;
            }
            1 => out.gate(Gate::Rx(pa, angle))?,
            _ => {
                out.gate(Gate::H(pb))?;
                self.logical_cx(a, b, out)?;
                let (pa, pb) = at(&self.layout);
                out.gate(Gate::H(pb))?;
                out.gate(Gate::Rx(pa, -angle))?;
            }
        }
        if role.after.is_some() {
            return Ok(());
        }
        let (_, pb) = at(&self.layout);
        if number == 2 {
            out.gate(Gate::Sdg(pb))?;
        }
        self.logical_cx(a, b, out)?;
        let (pa, pb) = at(&self.layout);
        if number == 2 {
            out.gate(Gate::S(pb))?;
            out.gate(Gate::Sdg(pa))?;
        }
        let (gates_a, _) = renaming(letter(one, a), letter(other, a), pa);
        let (gates_b, _) = renaming(letter(one, b), letter(other, b), pb);
        let opened = gates_a.into_iter().chain(gates_b).rev();
        opened.filter_map(Gate::inverse).try_for_each(|gate| out.gate(gate))
    }
}

/// The angle of OpenQASM for exp(-i θ P).
fn doubled(angle: f64) -> Result<f64> {
    let doubled = 2.0 * angle;
    if doubled.is_finite() {
        return Ok(doubled);
    }
    Err(Error::Rotation {
        argument: "angles",
        message: format!(
            "angles: too large to write as gates ({angle:e}); an OpenQASM angle is twice θ and must be finite"
        ),
    })
}
