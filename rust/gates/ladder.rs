//! Which controlled NOTs gather the parity of a string on one qubit.

use super::device::Device;
use crate::error::Result;

/// How a ladder is built.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shape {
    /// From each qubit to the next: neighbours only, and most in common with other strings.
    Staircase,
    /// In pairs: depth log2 w.
    Balanced,
    /// From each qubit to the last.
    Hub,
}

/// Controlled NOTs (control, target) after which `root` holds the parity of all terminals.
#[derive(Clone, Debug, PartialEq)]
pub struct Gathering {
    /// In order of time; the last one ends at `root`.
    pub rungs: Vec<(u16, u16)>,
    /// Where the parity is.
    pub root: u16,
}

/// Gathers parity where every pair of qubits is joined. At least two terminals.
pub fn anywhere(shape: Shape, terminals: &[u16]) -> Gathering {
    let root = terminals[terminals.len() - 1];
    let rungs = match shape {
        Shape::Staircase => terminals.windows(2).map(|pair| (pair[0], pair[1])).collect(),
        Shape::Hub => terminals[..terminals.len() - 1].iter().map(|&qubit| (qubit, root)).collect(),
        Shape::Balanced => {
            let mut rungs = Vec::new();
            let mut left = terminals.to_vec();
            while left.len() > 1 {
                let mut next = Vec::with_capacity(left.len().div_ceil(2));
                for pair in left.chunks(2) {
                    if let [control, target] = *pair {
                        rungs.push((control, target));
                    }
                    next.push(pair[pair.len() - 1]);
                }
                left = next;
            }
            rungs
        }
    };
    Gathering { rungs, root }
}

/// Gathers parity along the edges of a device, over qubits between where the terminals are not joined themselves.
///
/// On a tree the children give their parity to their parent from the leaves up. A qubit s between must not leave its own
/// value behind, so it gives that first: s to its parent, its children to s, and s to its parent again. A tree of e
/// edges with s qubits between takes e + s gates.
///
/// # Errors
/// The terminals are not connected.
pub fn along(device: &Device, shape: Shape, terminals: &[u16]) -> Result<Gathering> {
    let inside = device.joining(terminals)?;
    let last = terminals[terminals.len() - 1];
    let root = match shape {
        Shape::Staircase => last,
        Shape::Hub => {
            let joined = |qubit: u16| inside.iter().filter(|&&other| device.joins(qubit, other)).count();
            terminals.iter().copied().max_by_key(|&qubit| joined(qubit)).unwrap_or(last)
        }
        Shape::Balanced => {
            terminals.iter().copied().min_by_key(|&qubit| height(device, qubit, &inside)).unwrap_or(last)
        }
    };
    let tree = device.tree(root, &inside);
    let between = &inside[terminals.len()..];
    let mut rungs = Vec::with_capacity(tree.len() + between.len());
    gather(&tree, root, between, &mut rungs);
    Ok(Gathering { rungs, root })
}

fn height(device: &Device, root: u16, inside: &[u16]) -> usize {
    let mut heights = vec![(root, 0)];
    for (child, parent) in device.tree(root, inside) {
        let above = heights.iter().find(|(qubit, _)| *qubit == parent).map_or(0, |(_, height)| *height);
        heights.push((child, above + 1));
    }
    heights.into_iter().map(|(_, height)| height).max().unwrap_or(0)
}

fn gather(tree: &[(u16, u16)], here: u16, between: &[u16], rungs: &mut Vec<(u16, u16)>) {
    for &(child, _) in tree.iter().filter(|(_, parent)| *parent == here) {
        if between.contains(&child) {
            rungs.push((child, here));
        }
        gather(tree, child, between, rungs);
        rungs.push((child, here));
    }
}

/// A controlled NOT between the ends of a path: 4(d-1) gates on its d edges for d ≥ 2, one for d = 1.
pub fn controlled_not_along(path: &[u16]) -> Vec<(u16, u16)> {
    let edge = |k: usize| (path[k], path[k + 1]);
    let edges = path.len() - 1;
    // Down and up the path twice, the second time without the last edge: all values between are restored.
    let mut rungs: Vec<_> = (0..edges).rev().map(edge).collect();
    rungs.extend((1..edges).map(edge));
    if edges > 1 {
        rungs.extend((0..edges - 1).rev().map(edge));
        rungs.extend((1..edges - 1).map(edge));
    }
    rungs
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What each qubit holds after the gates, as a mask of initial values.
    fn values(qubits: usize, rungs: &[(u16, u16)]) -> Vec<u32> {
        let mut values: Vec<u32> = (0..qubits).map(|qubit| 1 << qubit).collect();
        for &(control, target) in rungs {
            values[usize::from(target)] ^= values[usize::from(control)];
        }
        values
    }

    #[test]
    fn every_shape_gathers_the_parity_with_one_gate_less_than_qubits() {
        for shape in [Shape::Staircase, Shape::Balanced, Shape::Hub] {
            for count in 2..9u16 {
                let terminals: Vec<u16> = (0..count).map(|k| 2 * k).collect();
                let made = anywhere(shape, &terminals);
                assert_eq!(made.rungs.len(), usize::from(count) - 1);
                assert_eq!(made.rungs.last().map(|rung| rung.1), Some(made.root));
                let mask = terminals.iter().fold(0, |mask, qubit| mask | 1 << qubit);
                assert_eq!(values(20, &made.rungs)[usize::from(made.root)], mask);
            }
        }
    }

    #[test]
    fn qubits_between_leave_nothing_behind() {
        // A line of seven and a spur: terminals far apart.
        let edges = [(0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (5, 6), (3, 7)];
        let device = Device::new(8, &edges);
        for shape in [Shape::Staircase, Shape::Balanced, Shape::Hub] {
            for mask in 1u32..256 {
                let terminals: Vec<u16> = (0..8u16).filter(|qubit| mask >> qubit & 1 == 1).collect();
                if terminals.len() < 2 {
                    continue;
                }
                let made = along(&device, shape, &terminals).unwrap();
                assert!(made.rungs.iter().all(|&(a, b)| device.joins(a, b)));
                assert_eq!(values(8, &made.rungs)[usize::from(made.root)], mask, "{shape:?} {terminals:?}");
            }
        }
    }

    #[test]
    fn a_controlled_not_along_a_path_changes_its_end_only() {
        for length in 2..8usize {
            let path: Vec<u16> = (0..length as u16).collect();
            let rungs = controlled_not_along(&path);
            assert_eq!(rungs.len(), if length == 2 { 1 } else { 4 * (length - 2) });
            let mut expected = values(length, &[]);
            expected[length - 1] ^= 1;
            assert_eq!(values(length, &rungs), expected);
        }
    }
}
