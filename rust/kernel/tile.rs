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
    Registers, bond, complex, diagonal, exchange, lane_exchange, mix, registers, scale, table, table_real, turn,
    turn_real,
};
use super::lanes::Real;
use super::vector::Vector;
use crate::passes::diagonal::{CosetFactors, Diagonal};
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
