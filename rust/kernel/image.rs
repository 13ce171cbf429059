//! Images of a state under an [`Action`](crate::action::Action), and what is made of them: a vector, an expectation, a Chebyshev recurrence.
//!
//! One coset of the state at a time lies in cache as vectors of real and imaginary parts. For each tile of eight vectors of
//! the result the addends are summed in registers; what becomes of the sum is the [`Ending`].

use super::addends::{accumulate, add};
use super::bodies::registers;
use super::copies::Refill;
use super::lanes::Real;
use super::tile::{Ahead, Place, fetch};
use super::vector::Vector;
use super::{Isa, VectorWork};
use crate::action::{ActionPass, STRETCH_BITS};
use crate::passes::diagonal::{CosetSums, DiagonalSum, LOW_BITS};
use crate::passes::tiles::{TILE, TILE_BITS};

/// A real number, or i times one.
#[derive(Clone, Copy, Debug)]
pub struct Turned<T> {
    /// The number.
    pub value: T,
    /// Whether it is multiplied by i.
    pub imaginary: bool,
}

/// sum += source · state + own · result.
#[derive(Clone, Copy)]
pub struct Gain<'a, T> {
    /// Where the sum lies.
    pub sum: Place<'a, T>,
    /// Factor of the result, if it enters.
    pub own: Option<Turned<T>>,
    /// Factor of the state, if it enters.
    pub source: Option<Turned<T>>,
}

/// What becomes of the numbers in the result's place. They are added last, so that they are rounded once.
#[derive(Clone, Copy, PartialEq)]
pub enum Old {
    /// They are overwritten.
    Dropped,
    /// They are added.
    Added,
    /// They are subtracted.
    Subtracted,
}

/// What becomes of the result.
#[derive(Clone, Copy)]
pub enum Ending<'a, T> {
    /// It is stored, halved if asked, and then enters sums.
    Store {
        /// Where it lies.
        out: Place<'a, T>,
        /// What becomes of the numbers there.
        old: Old,
        /// Whether it is halved at the end.
        halved: bool,
        /// Sums that it enters.
        gains: &'a [Gain<'a, T>],
    },
    /// Its inner product with the state is added to the room's.
    Dot,
}

/// What is brought nearer for the next coset meanwhile, tile by tile.
pub struct Coming<'a, T> {
    /// Where it is fetched into cache.
    pub fetched: &'a [Ahead<'a, T>],
    /// What is copied.
    pub copied: Option<Refill<'a, T>>,
}

/// A worker's room.
pub struct Room<T: Real> {
    /// Of real parts (and imaginary ones, unless theirs are others), and of imaginary parts.
    sums: [CosetSums<T>; 2],
    entries: Vec<usize>,
    /// Real part of the inner product, by lane.
    pub dot: [f64; 16],
}

impl<T: Real> Default for Room<T> {
    fn default() -> Self {
        Self { sums: Default::default(), entries: vec![], dot: [0.0; 16] }
    }
}

/// Sums of one coset, from `source` (vectors of real and imaginary parts in turn).
///
/// # Safety
/// `source` and all places hold one coset of the pass's space each; nobody writes to the source, and nobody else uses the
/// other places.
pub unsafe fn coset_image<T: Real>(
    isa: Isa,
    pass: &ActionPass<T>,
    source: *const T,
    rep: usize,
    ending: Ending<T>,
    coming: Coming<T>,
    room: &mut Room<T>,
) {
    for (diagonal, sums) in [&pass.diagonal, &pass.im_diagonal].into_iter().zip(&mut room.sums) {
        if let Some(diagonal) = diagonal {
            diagonal.prepare(rep, sums);
        }
    }
    // SAFETY: the contract is handed on.
    unsafe { isa.run_vectors(Image { pass, source, rep, ending, coming, room }) }
}

struct Image<'a, T: Real> {
    pass: &'a ActionPass<T>,
    source: *const T,
    rep: usize,
    ending: Ending<'a, T>,
    coming: Coming<'a, T>,
    room: &'a mut Room<T>,
}

impl<T: Real> VectorWork<T> for Image<'_, T> {
    type Output = ();

    /// # Safety
    /// As [`coset_image`], and the instruction set is there.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let Image { pass, source, rep, ending, coming, room } = self;
        let tiles = 1usize << (pass.space.dimension() - T::LANE_BITS - TILE_BITS);
        room.entries.resize(pass.addends.len(), 0);
        for tile in 0..tiles {
            let base = tile << TILE_BITS;
            let in_stretch = tile & ((1 << STRETCH_BITS) - 1);
            if in_stretch == 0 {
                for (entry, addend) in room.entries.iter_mut().zip(&pass.addends) {
                    *entry = addend.entry(base, rep);
                }
            }
            // SAFETY: by this function's contract; bases are vectors of the coset.
            unsafe {
                for ahead in coming.fetched {
                    fetch::<V>(ahead, tile);
                }
                if let Some(refill) = &coming.copied {
                    refill.tile::<V>(tile, tiles);
                }
                let zero = V::splat(T::default());
                let (mut re, mut im) = ([zero; TILE], [zero; TILE]);
                if pass.diagonal.is_some() {
                    add_diagonal::<V>(&mut re, &mut im, pass, &room.sums, source, base);
                }
                for (addend, entry) in pass.addends.iter().zip(&room.entries) {
                    let entry = entry ^ usize::from(addend.tile_entry[in_stretch]);
                    let from = source.add(((base ^ addend.x) & !(TILE - 1)) << (T::LANE_BITS + 1));
                    add::<V>(&mut re, &mut im, addend, entry, from);
                }
                finish::<V>(&re, &im, &ending, source, base, &mut room.dot);
            }
        }
    }
}

/// A vector of real parts and the vector of imaginary parts behind it.
///
/// # Safety
/// The address holds both.
#[inline(always)]
pub unsafe fn pair<V: Vector>(address: *const V::Element) -> (V, V) {
    // SAFETY: by contract.
    unsafe { (V::load(address), V::load(address.add(1 << V::Element::LANE_BITS))) }
}

/// Adds diagonal · state.
///
/// # Safety
/// As [`coset_image`].
#[inline(always)]
unsafe fn add_diagonal<V: Vector>(
    re: &mut [V; TILE],
    im: &mut [V; TILE],
    pass: &ActionPass<V::Element>,
    sums: &[CosetSums<V::Element>; 2],
    source: *const V::Element,
    base: usize,
) {
    let Some(diagonal) = &pass.diagonal else { return };
    // SAFETY: by contract.
    unsafe {
        let of_re = DiagonalTile::<V>::new(diagonal, &sums[0], base);
        let of_im = pass.im_diagonal.as_ref().map(|diagonal| DiagonalTile::<V>::new(diagonal, &sums[1], base));
        registers!(t => {
            let factor = of_re.factor(t);
            let im_factor = match &of_im {
                Some(tile) => tile.factor(t),
                None => factor,
            };
            let (a, b) = pair::<V>(source.add((base + t) << (V::Element::LANE_BITS + 1)));
            (re[t], im[t]) = (re[t].add(factor.mul(a)), im[t].add(im_factor.mul(b)));
        });
    }
}

/// A diagonal on one tile.
struct DiagonalTile<'a, V: Vector> {
    diagonal: &'a DiagonalSum<V::Element>,
    sums: &'a CosetSums<V::Element>,
    high: usize,
    first: usize,
    value: V,
    table: *const <V::Element as Real>::Line,
}

impl<'a, V: Vector> DiagonalTile<'a, V> {
    /// # Safety
    /// The instruction set is there, the sums are those of the diagonal, and the base is a tile of the coset.
    #[inline(always)]
    unsafe fn new(diagonal: &'a DiagonalSum<V::Element>, sums: &'a CosetSums<V::Element>, base: usize) -> Self {
        let low_vectors = LOW_BITS - V::Element::LANE_BITS;
        let (high, first) = (base >> low_vectors, base & ((1 << low_vectors) - 1));
        // SAFETY: by contract: the high part of a vector number is below the number of high values, its low part below that of
        // table lines; a tile does not cross high values, since it is at most as large as a low table.
        unsafe {
            let sum = sums.high.get_unchecked(high);
            let (value, table) = (V::splat(sum.value), diagonal.low.as_ptr().add(sum.low + first));
            Self { diagonal, sums, high, first, value, table }
        }
    }

    /// The diagonal at vector `t` of the tile.
    ///
    /// # Safety
    /// The instruction set is there, and `t` is below [`TILE`].
    #[inline(always)]
    unsafe fn factor(&self, t: usize) -> V {
        // SAFETY: by contract, as in `new`.
        unsafe {
            let mut factor = V::load(self.table.add(t).cast()).add(self.value);
            for (number, group) in self.diagonal.groups.iter().enumerate() {
                let part = V::splat(*self.sums.groups.get_unchecked(number * self.sums.high.len() + self.high));
                factor = factor.add(part.mul(V::load(group.sign(self.first + t))));
            }
            factor
        }
    }
}

/// Does with the result what the ending says.
///
/// # Safety
/// As [`coset_image`].
#[inline(always)]
unsafe fn finish<V: Vector>(
    re: &[V; TILE],
    im: &[V; TILE],
    ending: &Ending<V::Element>,
    source: *const V::Element,
    base: usize,
    dot: &mut [f64; 16],
) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // SAFETY: by contract.
    unsafe {
        match ending {
            Ending::Store { out, old, halved, gains } => {
                let half = V::splat(V::Element::from_f64(0.5));
                registers!(t => {
                    let address = out.address(base + t);
                    let (mut a, mut b) = (re[t], im[t]);
                    if *old != Old::Dropped {
                        let (c, d) = pair::<V>(address);
                        (a, b) = if *old == Old::Added { (a.add(c), b.add(d)) } else { (a.sub(c), b.sub(d)) };
                    }
                    if *halved {
                        (a, b) = (half.mul(a), half.mul(b));
                    }
                    let (first, second) = if out.interleaved { V::interleave(a, b) } else { (a, b) };
                    first.store(address);
                    second.store(address.add(lanes));
                    for gain in gains.iter() {
                        let address = gain.sum.address(base + t);
                        let (mut c, mut d) = pair::<V>(address);
                        // The earlier term first: partial sums are then those of the series.
                        if let Some(factor) = gain.source {
                            let (e, f) = pair::<V>(source.add((base + t) << (V::Element::LANE_BITS + 1)));
                            accumulate(&mut c, &mut d, V::splat(factor.value), e, f, factor.imaginary);
                        }
                        if let Some(factor) = gain.own {
                            accumulate(&mut c, &mut d, V::splat(factor.value), a, b, factor.imaginary);
                        }
                        c.store(address);
                        d.store(address.add(lanes));
                    }
                });
            }
            Ending::Dot => {
                let zero = V::splat(V::Element::default());
                let mut sum = zero;
                registers!(t => {
                    let (a, b) = pair::<V>(source.add((base + t) << (V::Element::LANE_BITS + 1)));
                    sum = sum.add(a.mul(re[t])).add(b.mul(im[t]));
                });
                let mut values = [V::Element::default(); 16];
                sum.store(values.as_mut_ptr());
                dot.iter_mut().zip(values).for_each(|(total, value)| *total += value.to_f64());
            }
        }
    }
}
