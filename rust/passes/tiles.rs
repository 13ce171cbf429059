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
use crate::kernel::lanes::Real;
use crate::operation::{Action, Operation, PARITIES};

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

/// Which arithmetic an operation needs on the registers of a tile.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Form {
    /// a + γ (b - a) for active registers.
    Exchange,
    /// Sums and differences for active registers, a - i t b for the others.
    Bond,
    /// a - i t b with one t for all.
    Mix,
    /// a + w t b.
    Turn,
    /// c a + w s b.
    Table,
    /// a + γ (b - a) with γ by lane.
    LaneExchange,
    /// c a + s b with complex c and s by lane.
    Complex,
    /// A number times everything.
    Scale,
    /// Phases from the tables of a diagonal.
    Diagonal,
}

/// Partner masks of registers times classes of active registers.
pub const ARMS: usize = 64;

/// Registers that an arm's bonds are active in. Arm `8 x + 2 i + s` mixes register t with t ^ x where the parity of `t & z_i`
/// differs from s: z_0 … z_3 are the masks that x overlaps evenly, since both partners are active or none.
pub const ACTIVE: [u8; ARMS] = {
    let mut table = [0u8; ARMS];
    let mut place = 8;
    while place < ARMS {
        let z = even_mask(place / 8, place / 2 % 4);
        let mut t = 0;
        while t < TILE {
            if ((t & z).count_ones() as usize & 1) ^ (place & 1) == 1 {
                table[place] |= 1 << t;
            }
            t += 1;
        }
        place += 1;
    }
    table
};

/// The `number`-th mask that x overlaps evenly.
const fn even_mask(x: usize, mut number: usize) -> usize {
    let mut z = 0;
    loop {
        if (z & x).count_ones() & 1 == 0 {
            if number == 0 {
                return z;
            }
            number -= 1;
        }
        z += 1;
    }
}

/// The arm of a bond for entry 0.
fn arm(x: usize, z: usize) -> usize {
    let number = (0..4).find(|&number| even_mask(x, number) == z);
    8 * x + 2 * number.expect("the mask of a bond overlaps its x mask evenly")
}

/// An operation on the registers of a tile.
#[derive(Clone, Debug)]
pub struct TileOperation<T: Real> {
    /// The arithmetic.
    pub form: Form,
    /// Whether partners enter with a real factor (`Turn`, `Table`).
    pub real: bool,
    /// Register t mixes with register t ^ x.
    pub x: usize,
    /// Lane l mixes with lane l ^ m.
    pub m: usize,
    /// Coefficients that are the same for all lanes; the place of the tables for `Diagonal`.
    pub numbers: [T; 5],
    /// Place among the diagonals of the pass.
    pub diagonal: usize,
    /// Coefficients by lane, some lines for each entry.
    pub lines: Vec<T::Line>,
    /// Lines of an entry, as a power of two.
    pub width_bits: u32,
    /// Parity masks over the vectors of a coset, one for each bit of an entry's number.
    pub masks: Vec<usize>,
    /// Parity masks over representatives.
    pub coset_masks: Vec<usize>,
    /// What register t adds to the entry's number, by exclusive or.
    pub register_entry: [usize; TILE],
    /// The same, counted in lines.
    pub register_line: [usize; TILE],
    /// For [`Form::Exchange`] and [`Form::Bond`], which registers are active: see [`ACTIVE`].
    pub arm: usize,
    /// Entries that leave everything as it is.
    pub idle: u16,
}

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

fn is_odd(masked: usize) -> bool {
    masked.count_ones() & 1 == 1
}

impl<T: Real> TileOperation<T> {
    /// Products and sums of reals for each amplitude, on average.
    fn arithmetic(&self, diagonals: &[Diagonal<T>]) -> f64 {
        match self.form {
            // Half of the amplitudes, in pairs: 4 sums, a product of complex numbers (6), 2 sums.
            Form::Exchange => 0.5 * 0.5 * 12.0,
            // Half in pairs with 8 sums and two complex products, half with 4 operations each.
            Form::Bond => 0.5 * 0.5 * 20.0 + 0.5 * 4.0,
            Form::Mix | Form::Turn => 4.0,
            Form::Table => {
                let entries = 1usize << self.masks.len();
                6.0 * (1.0 - f64::from(self.idle.count_ones()) / entries as f64)
            }
            Form::LaneExchange => 10.0,
            Form::Complex => 14.0,
            Form::Scale => 6.0,
            Form::Diagonal => 12.0 + 8.0 * diagonals[self.diagonal].groups.len() as f64,
        }
    }

    fn plain(form: Form) -> Self {
        Self {
            form,
            real: false,
            x: 0,
            m: 0,
            numbers: [T::default(); 5],
            diagonal: 0,
            lines: vec![],
            width_bits: 0,
            masks: vec![],
            coset_masks: vec![],
            register_entry: [0; TILE],
            register_line: [0; TILE],
            arm: 0,
            idle: 0,
        }
    }

    fn scale(factor: Complex64) -> Self {
        let mut operation = Self::plain(Form::Scale);
        operation.set_numbers(&[factor.re, factor.im]);
        operation
    }

    fn set_numbers(&mut self, values: &[f64]) {
        self.numbers.iter_mut().zip(values).for_each(|(own, value)| *own = T::from_f64(*value));
    }

    /// An operation that mixes, in the coordinates of a coset and a tile, and the factor of everything that it leaves to do.
    fn new(space: &Space, tile: &Space, x: u64, action: &Action) -> (Self, Complex64) {
        let local = space.coordinates(x);
        let m = local & ((1 << T::LANE_BITS) - 1);
        let x = tile.coordinates((local >> T::LANE_BITS) as u64);
        let sees_lanes = |mask: &u64| space.dual(*mask) & ((1 << T::LANE_BITS) - 1) != 0;
        let lanes = match action {
            Action::Exchange { mask, .. } | Action::Bond { mask, .. } => m != 0 || sees_lanes(mask),
            _ => false,
        };
        let (mut operation, factor) = match action {
            Action::Exchange { mask, gamma, factor } if lanes => {
                let entry = |odd: bool| if odd { vec![gamma.re, gamma.im] } else { vec![0.0, 0.0] };
                (Self::by_parity(Form::LaneExchange, space, tile, &[*mask], |parities| entry(parities == 1)), *factor)
            }
            Action::Exchange { mask, gamma, factor } => {
                let mut operation = Self::by_parity(Form::Exchange, space, tile, &[*mask], |_| vec![]);
                operation.set_numbers(&[gamma.re, gamma.im]);
                (operation, *factor)
            }
            Action::Bond { mask, plus, minus, tangent, factor } if lanes => {
                let odd = vec![(plus + minus).re, (plus + minus).im, (plus - minus).re, (plus - minus).im];
                let even = vec![1.0, 0.0, 0.0, -tangent];
                let entry = |parities: usize| if parities == 1 { odd.clone() } else { even.clone() };
                (Self::by_parity(Form::Complex, space, tile, &[*mask], entry), *factor)
            }
            Action::Bond { mask, plus, minus, tangent, factor } => {
                let mut operation = Self::by_parity(Form::Bond, space, tile, &[*mask], |_| vec![]);
                operation.set_numbers(&[plus.re, plus.im, minus.re, minus.im, *tangent]);
                (operation, *factor)
            }
            Action::Turn { mask: 0, tangent, cosine, .. } => {
                let mut operation = Self::plain(Form::Mix);
                operation.set_numbers(&[*tangent]);
                (operation, ONE * cosine)
            }
            Action::Turn { mask, tangent, cosine, .. } => {
                let signed = |parities: usize| vec![if parities == 1 { -tangent } else { *tangent }];
                (Self::by_parity(Form::Turn, space, tile, &[*mask], signed), ONE * cosine)
            }
            Action::Table { masks, entries, .. } => {
                let entry = |parities: usize| vec![entries[parities].0, entries[parities].1];
                (Self::by_parity(Form::Table, space, tile, masks, entry), ONE)
            }
            Action::Complex { mask, entries } => {
                let entry = |parities: usize| {
                    let (c, s) = entries[parities];
                    vec![c.re, c.im, s.re, s.im]
                };
                (Self::by_parity(Form::Complex, space, tile, &[*mask], entry), ONE)
            }
            Action::Diagonal(_) => unreachable!("diagonal operations have tables of their own"),
        };
        operation.real = matches!(action, Action::Turn { real: true, .. } | Action::Table { real: true, .. });
        (operation.x, operation.m) = (x, m);
        if matches!(operation.form, Form::Exchange | Form::Bond) {
            let seen = |t: usize| operation.register_entry[t] & 1;
            operation.arm = arm(x, seen(1) | seen(2) << 1 | seen(4) << 2);
        }
        if let (Action::Table { entries, .. }, true) = (action, operation.parities_are_lane_free()) {
            let idle = |(e, entry): (usize, &(f64, f64))| u16::from(*entry == (1.0, 0.0)) << e;
            operation.idle = entries.iter().enumerate().map(idle).sum();
        }
        (operation, factor)
    }

    fn parities_are_lane_free(&self) -> bool {
        // Each line then holds one value.
        self.lines.iter().all(|line| line.as_ref().iter().all(|value| *value == line.as_ref()[0]))
    }

    /// Lines of coefficients by parities of the index, laid out for registers and lanes.
    fn by_parity(form: Form, space: &Space, tile: &Space, masks: &[u64], entry: impl Fn(usize) -> Vec<f64>) -> Self {
        debug_assert!(masks.len() <= PARITIES);
        let locals: Vec<usize> = masks.iter().map(|mask| space.dual(*mask)).collect();
        let vectors: Vec<usize> = locals.iter().map(|local| local >> T::LANE_BITS).collect();
        let bits = |odd: &dyn Fn(usize) -> bool| (0..masks.len()).map(|j| usize::from(odd(j)) << j).sum::<usize>();
        let mut operation = Self::plain(form);
        for t in 0..TILE {
            let vector = tile.vector(t) as usize;
            operation.register_entry[t] = bits(&|j| is_odd(vector & vectors[j]));
        }
        let width = entry(0).len();
        debug_assert!(width == 0 || width.is_power_of_two());
        operation.width_bits = width.max(1).ilog2();
        operation.register_line = operation.register_entry.map(|number| number << operation.width_bits);
        operation.lines = vec![T::Line::default(); width << masks.len()];
        if width > 0 {
            for number in 0..1usize << masks.len() {
                for lane in 0..1usize << T::LANE_BITS {
                    let values = entry(number ^ bits(&|j| is_odd(lane & locals[j])));
                    for (line, value) in operation.lines[number * width..].iter_mut().zip(values) {
                        line.as_mut()[lane] = T::from_f64(value);
                    }
                }
            }
        }
        operation.masks = vectors;
        operation.coset_masks = masks.iter().map(|mask| if space.leaves(*mask) { *mask as usize } else { 0 }).collect();
        operation
    }
}
