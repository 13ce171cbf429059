//! The loop over the tiles of a coset: load, apply the operations of a run, store.
//!
//! A tile is eight vectors of real and eight of imaginary parts; see [`crate::passes::tiles`] for which amplitudes they are,
//! and [`super::bodies`] for the arithmetic.
//!
//! Worked example on three qubits, with vectors of one amplitude, so that the state is one tile and register t holds amplitude
//! t. The bond 0-1 with equal strengths has register mask x = 0b011 and is active where the parity of t & 0b011 is odd:
//! registers 1 ↔ 2 and 5 ↔ 6 exchange γ (b - a), registers 0, 3, 4, 7 are not read. X_0 X_2 has x = 0b101 and mixes 0 ↔ 5, 1 ↔ 4,
//! 2 ↔ 7, 3 ↔ 6 by re' = re + t im(partner), im' = im - t re(partner). Both act between one load and one store.

use super::VectorWork;
use super::bodies::{
    ACROSS, KEPT, Registers, WITHIN, bond, complex, diagonal, exchange, lane_exchange, mix, registers, scale, table,
    table_real, turn, turn_real,
};
use super::lanes::Real;
use super::vector::Vector;
use crate::passes::diagonal::{CosetFactors, Diagonal};
use crate::passes::layout::{Layout, packed};
use crate::passes::tile_operation::{Form, TileOperation};
use crate::passes::tiles::{Part, TILE, TileRun};

/// Where the vectors of a coset lie, in a state or in a buffer.
#[derive(Clone, Copy)]
pub struct Place<'a, T> {
    /// The first real of the state or buffer.
    pub start: *mut T,
    /// What the offsets are relative to, by exclusive or: twice the representative, or 0 in a buffer.
    pub origin: usize,
    /// The offsets; nothing where one vector follows the other from the start.
    pub layout: Option<&'a Layout>,
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
        // SAFETY: by contract the tile of the vector is there; registers are numbered below their count.
        unsafe {
            let offset = match self.layout {
                None => packed::<T>(v),
                Some(layout) => layout.tiles.get_unchecked(v / TILE) ^ layout.registers[v % TILE],
            };
            self.start.add(self.origin ^ offset)
        }
    }
}

/// What to fetch while a run is at work: every `step`-th vector of the next coset, from `first` on.
#[derive(Clone, Copy)]
pub struct Ahead<'a, T> {
    /// The first real of the state.
    pub start: *const T,
    /// Twice the representative of the next coset.
    pub origin: usize,
    /// Where a coset lies.
    pub layout: &'a Layout,
    /// First vector of each tile's share.
    pub first: usize,
    /// Distance of vectors.
    pub step: usize,
}

/// Where a run finds, or leaves, its coset.
#[derive(Clone, Copy)]
pub struct Home<T> {
    /// The first real of the state or buffer.
    pub start: *mut T,
    /// What the offsets are relative to, by exclusive or.
    pub origin: usize,
    /// Whether it is the state.
    pub outside: bool,
    /// (re, im, re, im, …) instead of a vector of real parts and a vector of imaginary parts.
    pub interleaved: bool,
}

impl<T: Real> Home<T> {
    /// Offsets of a run's tiles, and what they are relative to.
    #[inline(always)]
    fn layout<'a>(&self, run: &'a TileRun<T>, part: &Part) -> (&'a Layout, usize) {
        if self.outside { (&run.outside, self.origin ^ part.outside) } else { (&run.inside, self.origin ^ part.inside) }
    }
}

/// One run over the tiles of one part of a coset.
pub struct Tiles<'a, T: Real> {
    /// The run.
    pub run: &'a TileRun<T>,
    /// The part.
    pub part: &'a Part,
    /// The representative.
    pub rep: usize,
    /// Where vectors come from.
    pub from: Home<T>,
    /// Where they go.
    pub to: Home<T>,
    /// Tables of the pass.
    pub diagonals: &'a [Diagonal<T>],
    /// Their factors for this coset.
    pub factors: &'a [CosetFactors<T>],
    /// What to fetch meanwhile.
    pub ahead: Option<Ahead<'a, T>>,
    /// Room for one number an operation.
    pub entries: &'a mut Vec<usize>,
}

/// Calls a body with a constant register mask where the vector type wants it.
macro_rules! by_mask {
    ($v:ty, $x:expr, $body:ident $(<$lanes:ident>)? ( $($argument:expr),* )) => {
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

/// Calls a body with a constant arm where the vector type wants it.
macro_rules! by_arm {
    ($v:ty, $arm:expr, $body:ident ( $($argument:expr),* )) => {
        by_arm!(@ $v, $arm, $body ( $($argument),* )
            8 9 10 11 12 13 14 15 16 17 18 19 20 21 22 23 24 25 26 27 28 29 30 31 32 33 34 35
            36 37 38 39 40 41 42 43 44 45 46 47 48 49 50 51 52 53 54 55 56 57 58 59 60 61 62 63)
    };
    (@ $v:ty, $arm:expr, $body:ident $arguments:tt $($number:literal)*) => {
        if <$v>::UNROLLED {
            match $arm {
                $($number => by_arm!(@ $v, $body $arguments $number),)*
                _ => {}
            }
        } else {
            by_arm!(@ $v, $body $arguments $arm)
        }
    };
    (@ $v:ty, $body:ident ( $($argument:expr),* ) $arm:expr) => {
        $body::<$v>($($argument,)* $arm)
    };
}

/// Calls a body that exchanges lanes only where the operation mixes lanes.
macro_rules! by_mask_and_lanes {
    ($v:ty, $operation:expr, $body:ident ( $($argument:expr),* )) => {
        if $operation.m == 0 {
            by_mask!($v, $operation.x, $body<KEPT>($($argument),*))
        } else if <$v>::PARTS == 2 && <$v>::reaches_across($operation.m) {
            by_mask!($v, $operation.x, $body<ACROSS>($($argument),*))
        } else {
            by_mask!($v, $operation.x, $body<WITHIN>($($argument),*))
        }
    };
}

impl<T: Real> VectorWork<T> for Tiles<'_, T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: both places lie in memory of the right size that nobody else uses meanwhile, the part is
    /// one of the coset's, and the operations were prepared for cosets of this size.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let Tiles { run, part, rep, from, to, diagonals, factors, ahead, entries } = self;
        entries.resize(run.operations.len(), 0);
        let ((sources, source), (targets, target)) = (from.layout(run, part), to.layout(run, part));
        let mut tile = 0;
        for outer in &run.outer {
            for (entry, operation) in entries.iter_mut().zip(&run.operations) {
                *entry = operation.entry(outer | part.first, rep);
            }
            for _ in 0..run.inner {
                // SAFETY: by this function's contract; a run has as many tiles as its layouts.
                unsafe {
                    if let Some(ahead) = &ahead {
                        fetch::<V>(ahead, part.first / TILE + tile);
                    }
                    let base = part.first | run.inside.tiles.get_unchecked(tile) >> (T::LANE_BITS + 1);
                    let source = source ^ sources.tiles.get_unchecked(tile);
                    let target = target ^ targets.tiles.get_unchecked(tile);
                    tile += 1;
                    let (mut re, mut im) = load_tile::<V>(from.start, source, &sources.registers, from.interleaved);
                    for (operation, entry) in run.operations.iter().zip(entries.iter()) {
                        apply::<V>(&mut re, &mut im, operation, *entry, base, &run.comb, diagonals, factors);
                    }
                    store_tile::<V>(to.start, target, &targets.registers, to.interleaved, &re, &im);
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
}

/// Asks for this tile's share of the next coset's vectors.
///
/// # Safety
/// `tile` is below the number of tiles of the coset.
#[inline(always)]
pub unsafe fn fetch<V: Vector>(ahead: &Ahead<V::Element>, tile: usize) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // SAFETY: by contract.
    let origin = unsafe { ahead.origin ^ ahead.layout.tiles.get_unchecked(tile) };
    let mut number = ahead.first;
    while number < TILE {
        let address = ahead.start.wrapping_add(origin ^ ahead.layout.registers[number]);
        // A vector's real and imaginary parts fill one cache line each.
        V::prefetch(address);
        V::prefetch(address.wrapping_add(lanes));
        number += ahead.step;
    }
}

/// Reads a tile.
///
/// # Safety
/// The vectors of the tile lie in readable memory.
#[inline(always)]
unsafe fn load_tile<V: Vector>(
    start: *const V::Element,
    origin: usize,
    registers: &[usize; TILE],
    interleaved: bool,
) -> (Registers<V>, Registers<V>) {
    // SAFETY: by contract.
    unsafe {
        let zero = V::splat(V::Element::default());
        let (mut re, mut im) = ([zero; TILE], [zero; TILE]);
        let lanes = 1usize << V::Element::LANE_BITS;
        registers!(t => {
            let address = start.add(origin ^ registers[t]);
            re[t] = V::load(address);
            im[t] = V::load(address.add(lanes));
        });
        if interleaved {
            registers!(t => { (re[t], im[t]) = V::split(re[t], im[t]); });
        }
        (re, im)
    }
}

/// Writes a tile.
///
/// # Safety
/// The vectors of the tile lie in memory that nobody else uses.
#[inline(always)]
unsafe fn store_tile<V: Vector>(
    start: *mut V::Element,
    origin: usize,
    registers: &[usize; TILE],
    interleaved: bool,
    re: &Registers<V>,
    im: &Registers<V>,
) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // The compiler would keep the addresses of the loads, or the stores, for all operations between.
    let origin = std::hint::black_box(origin);
    // SAFETY: by contract.
    unsafe {
        registers!(t => {
            let address = start.add(origin ^ registers[t]);
            let (first, second) = if interleaved { V::interleave(re[t], im[t]) } else { (re[t], im[t]) };
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
            (Form::Exchange, _) => by_arm!(V, operation.arm | entry & 1, exchange(re, im, operation)),
            (Form::Bond, _) => by_arm!(V, operation.arm | entry & 1, bond(re, im, operation)),
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
