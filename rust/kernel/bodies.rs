//! The arithmetic of every operation on the registers of a tile.
//!
//! Every body is written once over [`Vector`]. The register mask `x` is a constant after inlining where the vector type asks
//! for it ([`Vector::UNROLLED`]), so that registers stay registers. Each result is a fixed sequence of rounded products,
//! sums and differences of two numbers: the same bits everywhere. In the comments a is a register and b its partner.

use super::lanes::Real;
use super::vector::{Lanes, Vector};
use crate::passes::diagonal::{CosetFactors, Diagonal, LOW_BITS};
use crate::passes::tile_operation::{ACTIVE, TileOperation};
use crate::passes::tiles::TILE;

/// The real or the imaginary parts of a tile.
pub type Registers<V> = [V; TILE];

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

/// Repeats a block for the parts of a vector.
macro_rules! parts {
    ($v:ty, $n:ident => $body:block) => {{
        {
            let $n: usize = 0;
            $body
        }
        if <$v>::PARTS == 2 {
            let $n: usize = 1;
            $body
        }
    }};
}

impl<T: Real> TileOperation<T> {
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

/// (c + i s) (a + i b).
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn product<V: Lanes>(c: V, s: V, a: V, b: V) -> (V, V) {
    // SAFETY: by contract.
    unsafe { (c.mul(a).sub(s.mul(b)), c.mul(b).add(s.mul(a))) }
}

/// a += γ (b - a), b -= γ (b - a) for pairs of active registers.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn exchange<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    arm: usize,
) {
    let (x, active) = (arm / TILE, ACTIVE[arm]);
    // SAFETY: by contract.
    unsafe {
        let (gamma_re, gamma_im) = (V::Part::splat(operation.numbers[0]), V::Part::splat(operation.numbers[1]));
        parts!(V, n => {
            registers!(t => {
                let u = (t ^ x) & 7;
                if t < u && active >> t & 1 == 1 {
                    let (a, b, c, d) = (re[t].part(n), im[t].part(n), re[u].part(n), im[u].part(n));
                    let (dr, di) = product(gamma_re, gamma_im, c.sub(a), d.sub(b));
                    (re[t], im[t]) = (re[t].with_part(n, a.add(dr)), im[t].with_part(n, b.add(di)));
                    (re[u], im[u]) = (re[u].with_part(n, c.sub(dr)), im[u].with_part(n, d.sub(di)));
                }
            });
        });
    }
}

/// plus (a + b) ± minus (a - b) for pairs of active registers, a - i t b for the others.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn bond<V: Vector>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    arm: usize,
) {
    let (x, active) = (arm / TILE, ACTIVE[arm]);
    // SAFETY: by contract.
    unsafe {
        let [plus_re, plus_im, minus_re, minus_im, tangent] = operation.numbers;
        let (plus_re, plus_im, minus_re, minus_im) =
            (V::Part::splat(plus_re), V::Part::splat(plus_im), V::Part::splat(minus_re), V::Part::splat(minus_im));
        let tangent = V::Part::splat(tangent);
        parts!(V, n => {
            registers!(t => {
                let u = (t ^ x) & 7;
                if t < u {
                    let (a, b, c, d) = (re[t].part(n), im[t].part(n), re[u].part(n), im[u].part(n));
                    let (e, f, g, h) = if active >> t & 1 == 1 {
                        let (sr, si) = product(plus_re, plus_im, a.add(c), b.add(d));
                        let (dr, di) = product(minus_re, minus_im, a.sub(c), b.sub(d));
                        (sr.add(dr), si.add(di), sr.sub(dr), si.sub(di))
                    } else {
                        let (e, f) = (a.add(tangent.mul(d)), b.sub(tangent.mul(c)));
                        (e, f, c.add(tangent.mul(b)), d.sub(tangent.mul(a)))
                    };
                    (re[t], im[t]) = (re[t].with_part(n, e), im[t].with_part(n, f));
                    (re[u], im[u]) = (re[u].with_part(n, g), im[u].with_part(n, h));
                }
            });
        });
    }
}

/// How the lanes of partners are exchanged: not at all.
pub const KEPT: u8 = 0;
/// Within registers.
pub const WITHIN: u8 = 1;
/// Across registers.
pub const ACROSS: u8 = 2;

/// Lanes exchanged by `m`, in the way that is known.
///
/// # Safety
/// The instruction set is there, and the way is that of `m`.
#[inline(always)]
unsafe fn exchanged<V: Vector, const LANES: u8>(vector: V, m: usize) -> V {
    // SAFETY: by contract.
    unsafe {
        match LANES {
            KEPT => vector,
            WITHIN => vector.exchange_known::<false>(m),
            _ => vector.exchange_known::<true>(m),
        }
    }
}

/// a - i t b with one t for all.
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn mix<V: Vector, const LANES: u8>(
    re: &mut Registers<V>,
    im: &mut Registers<V>,
    operation: &TileOperation<V::Element>,
    x: usize,
) {
    let m = operation.m;
    // SAFETY: by contract.
    unsafe {
        let tangent = V::splat(operation.numbers[0]);
        registers!(t => {
            let u = (t ^ x) & 7;
            if t <= u {
                let (a, b, c, d) = (re[t], im[t], re[u], im[u]);
                let (e, f) = (exchanged::<V, LANES>(c, m), exchanged::<V, LANES>(d, m));
                (re[t], im[t]) = (a.add(tangent.mul(f)), b.sub(tangent.mul(e)));
                if t < u {
                    let (e, f) = (exchanged::<V, LANES>(a, m), exchanged::<V, LANES>(b, m));
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
        pub unsafe fn $name<V: Vector, const LANES: u8>(
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
            let m = operation.m;
            // SAFETY: by contract.
            unsafe {
                registers!(t => {
                    let u = (t ^ x) & 7;
                    if t <= u && $used(operation, entry, t) {
                        let (a, b, c, d) = (re[t], im[t], re[u], im[u]);
                        let (e, f) = (exchanged::<V, LANES>(c, m), exchanged::<V, LANES>(d, m));
                        (re[t], im[t]) = one(operation.lines(entry, t), a, b, e, f);
                        if t < u {
                            let (e, f) = (exchanged::<V, LANES>(a, m), exchanged::<V, LANES>(b, m));
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
pub unsafe fn scale<V: Vector>(re: &mut Registers<V>, im: &mut Registers<V>, operation: &TileOperation<V::Element>) {
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
pub unsafe fn diagonal<V: Vector>(
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
