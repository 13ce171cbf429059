//! What happens to a coset while it is in cache: runs over its tiles.
//!
//! A *tile* is eight vectors of amplitudes, `base ^ comb[t]` for t = 0 … 7, held in registers as sixteen vectors of real
//! and imaginary parts. The eight differ by a span of three directions, so every operation whose x mask lies in that span
//! (and in the lanes of a vector) only mixes the registers of one tile: load, apply several operations, store. With the
//! directions e_0 + e_1, e_1 + e_2, e_2 + e_3 three bonds share one load.
//!
//! Bases are walked in an order that keeps what the signs of the operations depend on in the outer loop: parities are
//! computed there, once for all bases of the inner loop.

use num_complex::Complex64;

use super::LOOK_AHEAD;
use super::diagonal::Diagonal;
use super::layout::{Layout, packed, scattered};
use super::space::{Space, Span, subsets};
use super::tile_operation::{Form, TileOperation};
use crate::kernel::lanes::Real;
use crate::operation::{Action, Operation};

/// Directions of a tile.
pub const TILE_BITS: u32 = 3;
/// Vectors in a tile.
pub const TILE: usize = 1 << TILE_BITS;
/// Amplitudes of a part of a coset that stays in first-level cache, as a power of two.
const INNER_BITS: u32 = 10;
/// Products of cosines smaller than this are multiplied in before more are put off.
const SMALLEST_FACTOR: f64 = 1e-18;

/// Nothing left to do.
pub const ONE: Complex64 = Complex64::new(1.0, 0.0);

/// One traversal of a part of a coset, tile by tile.
#[derive(Clone, Debug)]
pub struct TileRun<T: Real> {
    /// Vectors of a tile, relative to its base.
    pub comb: [usize; TILE],
    /// Bases that change the parities of operations.
    pub outer: Vec<usize>,
    /// Tiles for each of them.
    pub inner: usize,
    /// Where the tiles lie in the state.
    pub outside: Layout,
    /// Where they lie in a buffer; the same where cosets are contiguous.
    pub inside: Layout,
    /// What to apply, in order.
    pub operations: Vec<TileOperation<T>>,
}

/// A part of a coset.
#[derive(Clone, Copy, Debug)]
pub struct Part {
    /// Its first vector.
    pub first: usize,
    /// Where that lies in the state.
    pub outside: usize,
    /// Where that lies in a buffer.
    pub inside: usize,
}

/// Runs that go over one part of the coset after the other.
#[derive(Clone, Debug)]
pub struct Stage<T: Real> {
    /// The parts.
    pub parts: Vec<Part>,
    /// The runs.
    pub runs: Vec<TileRun<T>>,
}

/// All that happens inside the cosets of a pass.
#[derive(Clone, Debug)]
pub struct Work<T: Real> {
    /// In order.
    pub stages: Vec<Stage<T>>,
    /// Diagonals that the runs refer to.
    pub diagonals: Vec<Diagonal<T>>,
}

/// A group of operations that share tiles.
struct Gathering<'a> {
    span: Span,
    operations: Vec<&'a Operation>,
}

/// Sorts the operations of a pass into runs and prepares them.
///
/// Factors of everything that the operations leave to do are multiplied to `owed`, what earlier passes left to do. The
/// product goes into the tables of a diagonal operation where the pass has one, else it is left to later ones; before it
/// gets too small it is applied on the way.
pub fn prepare<T: Real>(space: &Space, operations: &[&Operation], owed: &mut Complex64) -> Work<T> {
    let mut work = Work { stages: vec![], diagonals: vec![] };
    let mut diagonals: Vec<Vec<(u64, f64)>> = vec![];
    let mut runs: Vec<(Space, Vec<TileOperation<T>>)> = vec![];
    for Gathering { span, operations } in gather::<T>(space, operations) {
        let tile = Space::new(span.filled(TILE_BITS));
        let mut run = Vec::with_capacity(operations.len());
        for operation in operations {
            match operation.action() {
                Action::Diagonal(terms) => {
                    run.push(TileOperation { diagonal: diagonals.len(), ..TileOperation::plain(Form::Diagonal) });
                    diagonals.push(terms);
                }
                action => {
                    let (prepared, own) = TileOperation::new(space, &tile, operation.x(), &action);
                    *owed *= own;
                    run.push(prepared);
                }
            }
            if owed.norm() < SMALLEST_FACTOR {
                run.push(TileOperation::scale(std::mem::replace(owed, ONE)));
            }
        }
        runs.push((tile, run));
    }
    for terms in diagonals {
        work.diagonals.push(Diagonal::new(&terms, space, std::mem::replace(owed, ONE)));
    }
    for (tile, run) in runs {
        work.append(space, &tile, run);
    }
    work
}

/// Greedy: a run takes every later operation that fits its span and commutes with all that it skipped.
fn gather<'a, T: Real>(space: &Space, operations: &[&'a Operation]) -> Vec<Gathering<'a>> {
    let mut left = operations.to_vec();
    let mut found = vec![];
    loop {
        let mut span = Span::of_low_bits(0);
        let (mut taken, mut skipped): (Vec<&Operation>, Vec<&Operation>) = (vec![], vec![]);
        let mut rest = left.into_iter();
        for operation in rest.by_ref() {
            let x = (space.coordinates(operation.x()) >> T::LANE_BITS) as u64;
            if skipped.iter().all(|s| s.commutes_with_all_of(operation)) && span.admit(x, TILE_BITS) {
                taken.push(operation);
            } else {
                skipped.push(operation);
                if skipped.len() == LOOK_AHEAD {
                    break;
                }
            }
        }
        skipped.extend(rest);
        found.push(Gathering { span, operations: taken });
        if skipped.is_empty() {
            return found;
        }
        left = skipped;
    }
}

impl<T: Real> Work<T> {
    /// Multiplies everything by a number on the way: in the tables of a diagonal operation if there is one that can take
    /// it. Says whether there was.
    pub fn absorb(&mut self, factor: Complex64) -> bool {
        self.diagonals.last_mut().is_some_and(|diagonal| diagonal.absorb(factor, SMALLEST_FACTOR))
    }

    /// Multiplies everything by a number at the end.
    pub fn scale(&mut self, factor: Complex64) {
        let last = self.stages.last_mut().and_then(|stage| stage.runs.last_mut());
        last.expect("a pass has a run").operations.push(TileOperation::scale(factor));
    }

    fn append(&mut self, space: &Space, tile: &Space, operations: Vec<TileOperation<T>>) {
        let coset_bits = space.dimension() - T::LANE_BITS;
        let inner_bits = (INNER_BITS - T::LANE_BITS).min(coset_bits);
        let part_bits = if tile.highest() < inner_bits { inner_bits } else { coset_bits };
        let bases = tile.complement(part_bits);
        let signs = operations.iter().flat_map(|operation| &operation.masks).fold(0, |all, mask| all | mask);
        let (outer, inner) = (subsets(bases & signs), subsets(bases & !signs));
        let order: Vec<usize> = outer.iter().flat_map(|o| inner.iter().map(move |i| o | i)).collect();
        let comb = std::array::from_fn(|t| tile.vector(t) as usize);
        let outside = Layout::new(&order, &comb, |vector| scattered::<T>(space, vector));
        let inside = Layout::new(&order, &comb, packed::<T>);
        let run = TileRun { comb, outer, inner: inner.len(), outside, inside, operations };
        let part = |first: usize| Part { first, outside: scattered::<T>(space, first), inside: packed::<T>(first) };
        let parts = 1usize << (coset_bits - part_bits);
        match self.stages.last_mut() {
            Some(stage) if stage.parts.len() == parts => stage.runs.push(run),
            _ => {
                let parts = (0..parts).map(|number| part(number << part_bits)).collect();
                self.stages.push(Stage { parts, runs: vec![run] });
            }
        }
    }

    /// Products and sums of reals for each amplitude, on average.
    pub fn arithmetic(&self) -> f64 {
        let runs = self.stages.iter().flat_map(|stage| &stage.runs);
        runs.flat_map(|run| &run.operations).map(|operation| operation.arithmetic(&self.diagonals)).sum()
    }

    /// Number of operations on tiles, without factors that were put off.
    pub fn operations(&self) -> usize {
        let runs = self.stages.iter().flat_map(|stage| &stage.runs);
        runs.flat_map(|run| &run.operations).filter(|operation| operation.form != Form::Scale).count()
    }

    /// Number of runs.
    pub fn runs(&self) -> usize {
        self.stages.iter().map(|stage| stage.runs.len()).sum()
    }
}
