//! Which physical qubits are joined, and where the logical ones are.

use std::collections::VecDeque;

use crate::error::{Error, Result};

/// Neighbours of each physical qubit, ascending.
#[derive(Clone, Debug)]
pub struct Device {
    neighbours: Vec<Vec<u16>>,
}

impl Device {
    /// A device from its edges; their ends are below `qubits`.
    pub fn new(qubits: usize, edges: &[(u16, u16)]) -> Self {
        let mut neighbours = vec![Vec::new(); qubits];
        for &(a, b) in edges {
            neighbours[usize::from(a)].push(b);
            neighbours[usize::from(b)].push(a);
        }
        for list in &mut neighbours {
            list.sort_unstable();
            list.dedup();
        }
        Self { neighbours }
    }

    /// Whether two qubits are joined.
    pub fn joins(&self, a: u16, b: u16) -> bool {
        self.neighbours[usize::from(a)].binary_search(&b).is_ok()
    }

    /// A shortest path from any of `sources` to the nearest qubit that is wanted, ends included.
    ///
    /// # Errors
    /// None is reached: the caller checks that a device is connected.
    pub fn path(&self, sources: &[u16], wanted: impl Fn(u16) -> bool) -> Result<Vec<u16>> {
        let mut from: Vec<Option<u16>> = vec![None; self.neighbours.len()];
        let mut waiting: VecDeque<u16> = sources.iter().copied().collect();
        for &source in sources {
            from[usize::from(source)] = Some(source);
        }
        while let Some(here) = waiting.pop_front() {
            if wanted(here) {
                let mut path = vec![here];
                let mut now = here;
                while let Some(before) = from[usize::from(now)].filter(|&before| before != now) {
                    path.push(before);
                    now = before;
                }
                path.reverse();
                return Ok(path);
            }
            for &next in &self.neighbours[usize::from(here)] {
                if from[usize::from(next)].is_none() {
                    from[usize::from(next)] = Some(here);
                    waiting.push_back(next);
                }
            }
        }
        Err(Error::Internal { message: "a qubit of the device cannot be reached".into() })
    }

    /// Parents in a tree by breadth from a root, over the qubits that are `inside`; children after parents.
    pub fn tree(&self, root: u16, inside: &[u16]) -> Vec<(u16, u16)> {
        let mut left: Vec<u16> = inside.iter().copied().filter(|&qubit| qubit != root).collect();
        let mut tree = Vec::with_capacity(left.len());
        let mut waiting = VecDeque::from([root]);
        while let Some(here) = waiting.pop_front() {
            for &next in &self.neighbours[usize::from(here)] {
                if let Some(place) = left.iter().position(|&qubit| qubit == next) {
                    left.swap_remove(place);
                    tree.push((next, here));
                    waiting.push_back(next);
                }
            }
        }
        tree
    }

    /// Qubits of a tree that joins the terminals, the terminals first: the nearest one is joined by a shortest path until
    /// all are (H. Takahashi, A. Matsuyama, Math. Japonica 24, 573 (1980), from memory; at most twice the least length).
    ///
    /// # Errors
    /// Those of [`Device::path`].
    pub fn joining(&self, terminals: &[u16]) -> Result<Vec<u16>> {
        let mut inside: Vec<u16> = terminals.iter().copied().take(1).collect();
        let mut left: Vec<u16> = terminals.iter().copied().skip(1).collect();
        let mut between = Vec::new();
        while !left.is_empty() {
            let path = self.path(&inside, |qubit| left.contains(&qubit))?;
            for &qubit in &path[1..] {
                inside.push(qubit);
                if let Some(place) = left.iter().position(|&one| one == qubit) {
                    left.remove(place);
                } else {
                    between.push(qubit);
                }
            }
        }
        Ok(terminals.iter().copied().chain(between).collect())
    }

    /// Swaps that take each token home, where `homes[place]` is the home of the token at a place.
    ///
    /// Leaves of a spanning tree are settled one by one, so at most (qubits × diameter) swaps.
    ///
    /// # Errors
    /// Those of [`Device::path`].
    pub fn swaps_home(&self, homes: &[u16]) -> Result<Vec<(u16, u16)>> {
        let mut now = homes.to_vec();
        let mut swaps = Vec::new();
        let Some(root) = (0..now.len()).find(|&place| usize::from(now[place]) != place) else { return Ok(swaps) };
        let everyone: Vec<u16> = (0..now.len() as u16).collect();
        let tree = self.tree(root as u16, &everyone);
        let mut parent: Vec<Option<u16>> = vec![None; now.len()];
        for &(child, above) in &tree {
            parent[usize::from(child)] = Some(above);
        }
        // Children stand after parents: from the back, each place is a leaf of what is left.
        for &(leaf, _) in tree.iter().rev() {
            let Some(token) = now.iter().position(|&home| home == leaf) else { continue };
            for (a, b) in edges_between(&parent, token as u16, leaf) {
                now.swap(usize::from(a), usize::from(b));
                swaps.push((a, b));
            }
        }
        Ok(swaps)
    }
}

/// The edges of a tree from one place to another, in order.
fn edges_between(parent: &[Option<u16>], from: u16, to: u16) -> Vec<(u16, u16)> {
    let line = |mut place: u16| {
        let mut line = vec![place];
        while let Some(above) = parent[usize::from(place)] {
            line.push(above);
            place = above;
        }
        line
    };
    let (mut up, mut down) = (line(from), line(to));
    while up.len() > 1 && down.len() > 1 && up[up.len() - 2] == down[down.len() - 2] {
        up.pop();
        down.pop();
    }
    down.pop();
    let path: Vec<u16> = up.into_iter().chain(down.into_iter().rev()).collect();
    path.windows(2).map(|pair| (pair[0], pair[1])).collect()
}

/// Where the logical qubits are.
#[derive(Clone, Debug, PartialEq)]
pub struct Layout {
    /// Entry q is the physical qubit that holds logical qubit q.
    pub physical: Vec<u16>,
    /// The logical qubit on each physical one.
    logical: Vec<Option<u16>>,
}

impl Layout {
    /// A layout on a device of `qubits` qubits; entries are distinct and below it.
    pub fn new(physical: Vec<u16>, qubits: usize) -> Self {
        let mut logical = vec![None; qubits];
        for (qubit, &place) in physical.iter().enumerate() {
            logical[usize::from(place)] = Some(qubit as u16);
        }
        Self { physical, logical }
    }

    /// Follows a swap of two physical qubits.
    pub fn swap(&mut self, a: u16, b: u16) {
        self.logical.swap(usize::from(a), usize::from(b));
        for place in [a, b] {
            if let Some(qubit) = self.logical[usize::from(place)] {
                self.physical[usize::from(qubit)] = place;
            }
        }
    }

    /// For each place, where its token has to go to reach another layout; empty places take what is left.
    pub fn homes(&self, goal: &Self) -> Vec<u16> {
        let free: Vec<u16> =
            (0..goal.logical.len() as u16).filter(|&place| goal.logical[usize::from(place)].is_none()).collect();
        // Empty places that stay empty keep their token, so that nothing moves without need.
        let staying = |place: u16| self.logical[usize::from(place)].is_none() && free.contains(&place);
        let mut open = free.iter().copied().filter(|&place| !staying(place));
        let home = |place: u16| match self.logical[usize::from(place)] {
            Some(qubit) => goal.physical[usize::from(qubit)],
            None if staying(place) => place,
            None => open.next().unwrap_or(place),
        };
        (0..self.logical.len() as u16).map(home).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn swaps_take_every_token_home_along_edges() {
        let device = Device::new(6, &[(0, 1), (1, 2), (2, 3), (1, 4), (4, 5)]);
        for homes in [[0, 1, 2, 3, 4, 5], [5, 4, 3, 2, 1, 0], [1, 2, 3, 4, 5, 0], [0, 1, 3, 2, 4, 5]] {
            let mut now = homes;
            for (a, b) in device.swaps_home(&homes).unwrap() {
                assert!(device.joins(a, b));
                now.swap(usize::from(a), usize::from(b));
            }
            assert_eq!(now, [0, 1, 2, 3, 4, 5]);
        }
    }

    #[test]
    fn a_layout_follows_swaps_and_knows_its_way_back() {
        let start = Layout::new(vec![2, 0, 1], 5);
        let mut now = start.clone();
        now.swap(0, 3);
        now.swap(2, 0);
        assert_eq!(now.physical, [0, 3, 1]);
        let homes = now.homes(&start);
        let mut seen = homes.clone();
        seen.sort_unstable();
        assert_eq!(seen, [0, 1, 2, 3, 4]);
        assert_eq!((homes[0], homes[3], homes[1], homes[4]), (2, 0, 1, 4));
    }
}
