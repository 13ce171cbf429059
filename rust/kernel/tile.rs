//! Operations on the registers of a tile, and the loop over tiles.
//!
//! A tile is eight vectors of real and eight of imaginary parts; see [`crate::passes::tiles`] for which amplitudes they are.
//! Every body below is written once over [`Vector`]. The register mask `x` is a constant after inlining where the vector
//! type asks for it ([`Vector::UNROLLED`]), so that registers stay registers; the portable form loops over arrays.
//!
//! Each result is a fixed sequence of rounded products, sums and differences of two numbers: the same bits everywhere.

use super::VectorWork;
use super::lanes::Real;
use super::vector::Vector;
use crate::passes::diagonal::{CosetFactors, Diagonal, LOW_BITS};
use crate::passes::tiles::{Form, TILE, TileOperation, TileRun};

/// Where the vectors of a coset lie.
#[derive(Clone, Copy)]
pub struct Place<'a, T> {
    /// The first real of the buffer, of the block, or of the whole state where the coset is scattered.
    pub start: *mut T,
    /// Representative, offsets of the contiguous runs, and amplitudes in a run as a power of two.
    pub scattered: Option<(usize, &'a [usize], u32)>,
    /// (re, im, re, im, …) instead of a vector of real parts and a vector of imaginary parts.
    pub interleaved: bool,
}

impl<T: Real> Place<'_, T> {
    /// Address of vector `v`.
    ///
    /// # Safety
    /// `v` is below the number of vectors of the coset that this place was made for.
    #[inline(always)]
    pub unsafe fn address(&self, v: usize) -> *mut T {
        match self.scattered {
            // SAFETY: in bounds by contract.
            None => unsafe { self.start.add(v << (T::LANE_BITS + 1)) },
            Some((rep, offsets, run_bits)) => {
                let amplitude = v << T::LANE_BITS;
                // SAFETY: the offsets cover the coset, and representative and offset are indices of the state.
                unsafe {
                    let run = rep ^ offsets.get_unchecked(amplitude >> run_bits);
                    self.start.add(2 * (run + (amplitude & ((1 << run_bits) - 1))))
                }
            }
        }
    }
}

/// What to fetch while a run is at work: every `step`-th vector of the next coset, from `first` on.
#[derive(Clone, Copy)]
pub struct Ahead<'a, T> {
    /// The next coset.
    pub next: Place<'a, T>,
    /// First vector of each tile's share.
    pub first: usize,
    /// Distance of vectors.
    pub step: usize,
}

/// One run over the tiles of one part of a coset.
pub struct Tiles<'a, T: Real> {
    /// The run.
    pub run: &'a TileRun<T>,
    /// First vector of the part.
    pub part: usize,
    /// The representative.
    pub rep: usize,
    /// Where vectors come from.
    pub from: Place<'a, T>,
    /// Where they go.
    pub to: Place<'a, T>,
    /// Tables of the pass.
    pub diagonals: &'a [Diagonal<T>],
    /// Their factors for this coset.
    pub factors: &'a [CosetFactors<T>],
    /// What to fetch meanwhile.
    pub ahead: Option<Ahead<'a, T>>,
    /// Room for one number an operation.
    pub entries: &'a mut Vec<usize>,
}

/// Repeats a block for the registers of a tile.
macro_rules! registers {
    ($t:ident => $body:block) => {
        registers!(@ $t $body 0 1 2 3 4 5 6 7)
    };
    (@ $t:ident $body:block $($register:literal)*) => {
        $({ let $t: usize = $register; $body })*
    };
}

pub(super) use registers;

/// Calls a body with a constant register mask where the vector type wants it.
macro_rules! by_mask {
    ($v:ty, $x:expr, $body:ident $(<$lanes:literal>)? ( $($argument:expr),* )) => {
        if <$v>::UNROLLED {
            match $x {
                0 => $body::<$v $(, $lanes)?>($($argument,)* 0),
                1 => $body::<$v $(, $lanes)?>($($argument,)* 1),
                2 => $body::<$v $(, $lanes)?>($($argument,)* 2),
                3 => $body::<$v $(, $lanes)?>($($argument,)* 3),
                4 => $body::<$v $(, $lanes)?>($($argument,)* 4),
                5 => $body::<$v $(, $lanes)?>($($argument,)* 5),
                6 => $body::<$v $(, $lanes)?>($($argument,)* 6),
                _ => $body::<$v $(, $lanes)?>($($argument,)* 7),
            }
        } else {
            $body::<$v $(, $lanes)?>($($argument,)* $x)
        }
    };
}

/// Calls a body that exchanges lanes only where the operation mixes lanes.
macro_rules! by_mask_and_lanes {
    ($v:ty, $operation:expr, $body:ident ( $($argument:expr),* )) => {
        if $operation.m == 0 {
            by_mask!($v, $operation.x, $body<false>($($argument),*))
        } else {
            by_mask!($v, $operation.x, $body<true>($($argument),*))
        }
    };
}

type Registers<V> = [V; TILE];

impl<T: Real> VectorWork<T> for Tiles<'_, T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: both places lie in memory of the right size that nobody else uses meanwhile, the part is
    /// one of the coset's, and the operations were prepared for cosets of this size.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let Tiles { run, part, rep, from, to, diagonals, factors, ahead, entries } = self;
        entries.resize(run.operations.len(), 0);
        let mut tile = part >> 3;
        for outer in &run.outer {
            let outer = outer | part;
            for (entry, operation) in entries.iter_mut().zip(&run.operations) {
                *entry = operation.entry(outer, rep);
            }
            for inner in &run.inner {
                let base = outer | inner;
                // SAFETY: by this function's contract; bases and combs stay below the number of vectors.
                unsafe {
                    if let Some(ahead) = &ahead {
                        fetch::<V>(ahead, tile);
                    }
                    tile += 1;
                    let (mut re, mut im) = load_tile::<V>(&from, &run.comb, base);
                    for (operation, entry) in run.operations.iter().zip(entries.iter()) {
                        apply::<V>(&mut re, &mut im, operation, *entry, base, &run.comb, diagonals, factors);
                    }
                    store_tile::<V>(&to, &run.comb, base, &re, &im);
                }
            }
        }
    }
}

impl<T: Real> TileOperation<T> {
    /// Number of the entry that the parities of a base and a representative select.
    #[inline(always)]
    fn entry(&self, base: usize, rep: usize) -> usize {
        let mut entry = 0;
        for (j, (mask, coset)) in self.masks.iter().zip(&self.coset_masks).enumerate() {
            entry |= (((base & mask).count_ones() ^ (rep & coset).count_ones()) as usize & 1) << j;
        }
        entry
    }

    /// Lines of the entry that register `t` sees.
    ///
    /// # Safety
    /// `entry` comes from [`TileOperation::entry`].
    #[inline(always)]
    unsafe fn lines(&self, entry: usize, t: usize) -> *const T {
        // Widths are powers of two, so scaled numbers combine as the numbers do.
        let place = (entry << self.width_bits) ^ self.register_line[t];
        // SAFETY: entries have as many bits as there are masks, and `lines` holds all of them.
        unsafe { self.lines.as_ptr().add(place).cast() }
    }
}

/// Asks for this tile's share of the next coset's vectors.
///
/// # Safety
/// `tile` is below the number of tiles of the coset.
#[inline(always)]
pub unsafe fn fetch<V: Vector>(ahead: &Ahead<V::Element>, tile: usize) {
    let lanes = 1usize << V::Element::LANE_BITS;
    let mut number = ahead.first;
    while number < TILE {
        // SAFETY: by contract.
        let address = unsafe { ahead.next.address(TILE * tile + number) };
        // A vector's real and imaginary parts fill one cache line each.
        V::prefetch(address);
        V::prefetch(address.wrapping_add(lanes));
        number += ahead.step;
    }
}

/// Reads a tile.
///
/// # Safety
/// As [`Place::address`] for all vectors of the tile.
#[inline(always)]
unsafe fn load_tile<V: Vector>(
    from: &Place<V::Element>,
    comb: &[usize; TILE],
    base: usize,
) -> (Registers<V>, Registers<V>) {
    // SAFETY: by contract.
    unsafe {
        let zero = V::splat(V::Element::default());
        let (mut re, mut im) = ([zero; TILE], [zero; TILE]);
        let lanes = 1usize << V::Element::LANE_BITS;
        registers!(t => {
            let address = from.address(base ^ comb[t]);
            re[t] = V::load(address);
            im[t] = V::load(address.add(lanes));
        });
        if from.interleaved {
            registers!(t => { (re[t], im[t]) = V::split(re[t], im[t]); });
        }
        (re, im)
    }
}

/// Writes a tile.
///
/// # Safety
/// As [`load_tile`].
#[inline(always)]
unsafe fn store_tile<V: Vector>(
    to: &Place<V::Element>,
    comb: &[usize; TILE],
    base: usize,
    re: &Registers<V>,
    im: &Registers<V>,
) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // SAFETY: by contract.
    unsafe {
        registers!(t => {
            let address = to.address(base ^ comb[t]);
            let (first, second) = if to.interleaved { V::interleave(re[t], im[t]) } else { (re[t], im[t]) };
            first.store(address);
            second.store(address.add(lanes));
        });
    }
}

/// Applies one operation to a tile.
///
/// # Safety
/// The instruction set is there; `entry`, `base` and the tables belong to the operation.
#[inline(always)]
#[allow(clippy::too_many_arguments)]
unsafe fn apply<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    entry: usize,
    base: usize,
    comb: &[usize; TILE],
    diagonals: &[Diagonal<V::Element>],
    factors: &[CosetFactors<V::Element>],
) {
    // SAFETY: by contract.
    unsafe {
        match (operation.form, operation.real) {
            (Form::Exchange, _) => by_mask!(V, operation.x, exchange(re, im, operation, operation.active[entry & 1])),
            (Form::Bond, _) => by_mask!(V, operation.x, bond(re, im, operation, operation.active[entry & 1])),
            (Form::Mix, _) => by_mask_and_lanes!(V, operation, mix(re, im, operation)),
            (Form::Turn, false) => by_mask_and_lanes!(V, operation, turn(re, im, operation, entry)),
            (Form::Turn, true) => by_mask_and_lanes!(V, operation, turn_real(re, im, operation, entry)),
            (Form::Table, false) => by_mask_and_lanes!(V, operation, table(re, im, operation, entry)),
            (Form::Table, true) => by_mask_and_lanes!(V, operation, table_real(re, im, operation, entry)),
            (Form::LaneExchange, _) => by_mask_and_lanes!(V, operation, lane_exchange(re, im, operation, entry)),
            (Form::Complex, _) => by_mask_and_lanes!(V, operation, complex(re, im, operation, entry)),
            (Form::Scale, _) => scale::<V>(re, im, operation),
            (Form::Diagonal, _) => {
                let place = operation.diagonal;
                diagonal::<V>(re, im, &diagonals[place], &factors[place], base, comb);
            }
        }
    }
}

/// (c + i s) (a + i b).
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn product<V: Vector>(c: V, s: V, a: V, b: V) -> (V, V) {
    // SAFETY: by contract.
    unsafe { (c.mul(a).sub(s.mul(b)), c.mul(b).add(s.mul(a))) }
}

/// a += γ (b - a), b -= γ (b - a) for pairs of active registers.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
unsafe fn exchange<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    active: u8,
    x: usize,
) {
    // SAFETY: by contract.
    unsafe {
        let (gamma_re, gamma_im) = (V::splat(operation.numbers[0]), V::splat(operation.numbers[1]));
        registers!(t => {
            let u = (t ^ x) & 7;
            if t < u && active >> t & 1 == 1 {
                let (dr, di) = product(gamma_re, gamma_im, re[u].sub(re[t]), im[u].sub(im[t]));
                (re[t], im[t], re[u], im[u]) = (re[t].add(dr), im[t].add(di), re[u].sub(dr), im[u].sub(di));
            }
        });
    }
}

/// plus (a + b) ± minus (a - b) for pairs of active registers, a - i t b for the others.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
unsafe fn bond<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    active: u8,
    x: usize,
) {
    // SAFETY: by contract.
    unsafe {
        let [plus_re, plus_im, minus_re, minus_im, tangent] = operation.numbers;
        let (plus_re, plus_im, minus_re, minus_im) =
            (V::splat(plus_re), V::splat(plus_im), V::splat(minus_re), V::splat(minus_im));
        let tangent = V::splat(tangent);
        registers!(t => {
            let u = (t ^ x) & 7;
            if t < u {
                let (a, b, c, d) = (re[t], im[t], re[u], im[u]);
                if active >> t & 1 == 1 {
                    let (sr, si) = product(plus_re, plus_im, a.add(c), b.add(d));
                    let (dr, di) = product(minus_re, minus_im, a.sub(c), b.sub(d));
                    (re[t], im[t], re[u], im[u]) = (sr.add(dr), si.add(di), sr.sub(dr), si.sub(di));
                } else {
                    (re[t], im[t]) = (a.add(tangent.mul(d)), b.sub(tangent.mul(c)));
                    (re[u], im[u]) = (c.add(tangent.mul(b)), d.sub(tangent.mul(a)));
                }
            }
        });
    }
}

/// a - i t b with one t for all.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
unsafe fn mix<V: Vector, const LANES: bool>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    x: usize,
) {
    let m = if LANES { operation.m } else { 0 };
    // SAFETY: by contract.
    unsafe {
        let tangent = V::splat(operation.numbers[0]);
        registers!(t => {
            let u = (t ^ x) & 7;
            if t <= u {
                let (a, b, c, d) = (re[t], im[t], re[u], im[u]);
                let (e, f) = if LANES { (c.exchange(m), d.exchange(m)) } else { (c, d) };
                (re[t], im[t]) = (a.add(tangent.mul(f)), b.sub(tangent.mul(e)));
                if t < u {
                    let (e, f) = if LANES { (a.exchange(m), b.exchange(m)) } else { (a, b) };
                    (re[u], im[u]) = (c.add(tangent.mul(f)), d.sub(tangent.mul(e)));
                }
            }
        });
    }
}

/// Defines a body that computes each register from itself, its partner and the lines of its entry.
macro_rules! by_partner {
    ($(#[$attribute:meta])* $name:ident if $used:ident, $lines:ident, $a:ident, $b:ident, $c:ident, $d:ident => $result:expr) => {
        $(#[$attribute])*
        ///
        /// # Safety
        /// The instruction set is there, and the entry is one of the operation's.
        #[inline(always)]
        unsafe fn $name<V: Vector, const LANES: bool>(
            re: &mut Registers<V>,
            im: &mut Registers<V>,
            operation: &TileOperation<V::Element>,
            entry: usize,
            x: usize,
        ) {
            // A function, not a closure: it has to be inlined to be compiled for the instruction set.
            #[inline(always)]
            unsafe fn one<V: Vector>($lines: *const V::Element, $a: V, $b: V, $c: V, $d: V) -> (V, V) {
                // SAFETY: as for the whole body.
                unsafe { $result }
            }
            let m = if LANES { operation.m } else { 0 };
            // SAFETY: by contract.
            unsafe {
                registers!(t => {
                    let u = (t ^ x) & 7;
                    if t <= u && $used(operation, entry, t) {
                        let (a, b, c, d) = (re[t], im[t], re[u], im[u]);
                        let (e, f) = if LANES { (c.exchange(m), d.exchange(m)) } else { (c, d) };
                        (re[t], im[t]) = one(operation.lines(entry, t), a, b, e, f);
                        if t < u {
                            let (e, f) = if LANES { (a.exchange(m), b.exchange(m)) } else { (a, b) };
                            (re[u], im[u]) = one(operation.lines(entry, u), c, d, e, f);
                        }
                    }
                });
            }
        }
    };
}

#[inline(always)]
fn always<T: Real>(_operation: &TileOperation<T>, _entry: usize, _t: usize) -> bool {
    true
}

/// Whether the entry that register `t` sees changes anything.
#[inline(always)]
fn is_busy<T: Real>(operation: &TileOperation<T>, entry: usize, t: usize) -> bool {
    operation.idle >> (entry ^ operation.register_entry[t]) & 1 == 0
}

/// Line `n` of an entry.
///
/// # Safety
/// The entry has that many lines.
#[inline(always)]
unsafe fn line<V: Vector>(lines: *const V::Element, n: usize) -> V {
    // SAFETY: by contract.
    unsafe { V::load(lines.add(n << V::Element::LANE_BITS)) }
}

by_partner!(
    /// a - i t b.
    turn if always, lines, a, b, c, d => {
        let t = line::<V>(lines, 0);
        (a.add(t.mul(d)), b.sub(t.mul(c)))
    }
);
by_partner!(
    /// a + t b.
    turn_real if always, lines, a, b, c, d => {
        let t = line::<V>(lines, 0);
        (a.add(t.mul(c)), b.add(t.mul(d)))
    }
);
by_partner!(
    /// c a - i s b.
    table if is_busy, lines, a, b, c, d => {
        let (cosine, sine) = (line::<V>(lines, 0), line::<V>(lines, 1));
        (cosine.mul(a).add(sine.mul(d)), cosine.mul(b).sub(sine.mul(c)))
    }
);
by_partner!(
    /// c a + s b.
    table_real if is_busy, lines, a, b, c, d => {
        let (cosine, sine) = (line::<V>(lines, 0), line::<V>(lines, 1));
        (cosine.mul(a).add(sine.mul(c)), cosine.mul(b).add(sine.mul(d)))
    }
);
by_partner!(
    /// a + γ (b - a) with γ by lane.
    lane_exchange if always, lines, a, b, c, d => {
        let (re, im) = product(line::<V>(lines, 0), line::<V>(lines, 1), c.sub(a), d.sub(b));
        (a.add(re), b.add(im))
    }
);
by_partner!(
    /// c a + s b with complex c and s by lane.
    complex if always, lines, a, b, c, d => {
        let own = product(line::<V>(lines, 0), line::<V>(lines, 1), a, b);
        let other = product(line::<V>(lines, 2), line::<V>(lines, 3), c, d);
        (own.0.add(other.0), own.1.add(other.1))
    }
);

/// A number times everything.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
unsafe fn scale<V: Vector>(re: &mut Registers<V>, im: &mut Registers<V>, operation: &TileOperation<V::Element>) {
    // SAFETY: by contract.
    unsafe {
        let (c, s) = (V::splat(operation.numbers[0]), V::splat(operation.numbers[1]));
        registers!(t => { (re[t], im[t]) = product(c, s, re[t], im[t]); });
    }
}

/// Phases: low table times high factor times the signed phases of the groups.
///
/// # Safety
/// The instruction set is there, and the factors are those of the diagonal for a coset of this size.
#[inline(always)]
unsafe fn diagonal<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    diagonal: &Diagonal<V::Element>,
    factors: &CosetFactors<V::Element>,
    base: usize,
    comb: &[usize; TILE],
) {
    let low_vectors = LOW_BITS - V::Element::LANE_BITS;
    // The compiler would compute all eight addresses for every tile, whether or not it has a diagonal operation.
    let base = std::hint::black_box(base);
    // SAFETY: by contract: the high part of a vector number is below the number of high factors, its low part below that of
    // table vectors.
    unsafe {
        registers!(t => {
            let vector = base ^ comb[t];
            let (high, low) = (vector >> low_vectors, vector & ((1 << low_vectors) - 1));
            let factor = factors.high.get_unchecked(high);
            let table: *const V::Element = diagonal.low.as_ptr().add(factor.low + 2 * low).cast();
            let (mut c, mut s) =
                product(V::splat(factor.re), V::splat(factor.im), line::<V>(table, 0), line::<V>(table, 1));
            for (number, group) in diagonal.groups.iter().enumerate() {
                let [re, im] = *factors.groups.get_unchecked(number * factors.high.len() + high);
                let sign = group.sign(low);
                (c, s) = product(V::splat(re), V::splat(im).mul(V::load(sign)), c, s);
            }
            (re[t], im[t]) = product(c, s, re[t], im[t]);
        });
    }
}
