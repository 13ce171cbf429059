//! One addend of an [`Action`](crate::action::Action) on one tile: coefficients times the amplitudes of another tile.

use super::bodies::registers;
use super::image::pair;
use super::lanes::Real;
use super::vector::Vector;
use crate::action::Addend;
use crate::passes::tiles::TILE;

impl<T: Real> Addend<T> {
    /// Number of the entry at the first tile of a stretch.
    #[inline(always)]
    pub fn entry(&self, base: usize, rep: usize) -> usize {
        let mut entry = 0;
        for (j, (mask, coset)) in self.masks.iter().zip(&self.coset_masks).enumerate() {
            entry |= (((base & mask).count_ones() ^ (rep & coset).count_ones()) as usize & 1) << j;
        }
        entry
    }
}

/// Adds one addend; `from` is the tile that it reads.
///
/// # Safety
/// The instruction set is there, the entry is one of the addend's, and `from` holds a tile.
#[inline(always)]
pub unsafe fn add<V: Vector>(
    re: &mut [V; TILE],
    im: &mut [V; TILE],
    addend: &Addend<V::Element>,
    entry: usize,
    from: *const V::Element,
) {
    let x = addend.x & (TILE - 1);
    let stride = V::Element::LANE_BITS + 1;
    // SAFETY: by contract.
    unsafe {
        if addend.swapped || addend.im_entry != 0 {
            add_folded(re, im, addend, entry, from);
        } else if !addend.lines.is_empty() {
            let m = addend.m;
            registers!(t => {
                let coefficient = V::load(addend.lines.as_ptr().add(entry ^ addend.register_entry[t]).cast());
                let (a, b) = pair::<V>(from.add((t ^ x) << stride));
                accumulate(&mut re[t], &mut im[t], coefficient, a.exchange(m), b.exchange(m), addend.imaginary);
            });
        } else if addend.uniform {
            let entry = entry ^ addend.register_entry[0];
            if addend.idle >> entry & 1 == 1 {
                return;
            }
            let coefficient = V::splat(addend.values[entry & 15]);
            if addend.imaginary {
                registers!(t => {
                    let (a, b) = pair::<V>(from.add((t ^ x) << stride));
                    (re[t], im[t]) = (re[t].sub(coefficient.mul(b)), im[t].add(coefficient.mul(a)));
                });
            } else {
                registers!(t => {
                    let (a, b) = pair::<V>(from.add((t ^ x) << stride));
                    (re[t], im[t]) = (re[t].add(coefficient.mul(a)), im[t].add(coefficient.mul(b)));
                });
            }
        } else {
            registers!(t => {
                let entry = entry ^ addend.register_entry[t];
                if addend.idle >> entry & 1 == 0 {
                    let coefficient = V::splat(addend.values[entry & 15]);
                    let (a, b) = pair::<V>(from.add((t ^ x) << stride));
                    accumulate(&mut re[t], &mut im[t], coefficient, a, b, addend.imaginary);
                }
            });
        }
    }
}

/// Adds one addend that tells imaginary from real parts; see [`add`].
///
/// # Safety
/// As [`add`].
#[inline(always)]
unsafe fn add_folded<V: Vector>(
    re: &mut [V; TILE],
    im: &mut [V; TILE],
    addend: &Addend<V::Element>,
    entry: usize,
    from: *const V::Element,
) {
    let (x, m) = (addend.x & (TILE - 1), addend.m);
    let coefficient = |entry: usize| -> V {
        // SAFETY: by contract.
        unsafe {
            match addend.lines.is_empty() {
                true => V::splat(addend.values[entry & 15]),
                false => V::load(addend.lines.as_ptr().add(entry).cast()),
            }
        }
    };
    // SAFETY: by contract.
    unsafe {
        registers!(t => {
            let entry = entry ^ addend.register_entry[t];
            let (a, b) = pair::<V>(from.add((t ^ x) << (V::Element::LANE_BITS + 1)));
            let (a, b) = if addend.swapped { (b, a) } else { (a, b) };
            re[t] = re[t].add(coefficient(entry).mul(a.exchange(m)));
            im[t] = im[t].add(coefficient(entry ^ addend.im_entry).mul(b.exchange(m)));
        });
    }
}

/// += c (a + i b), or i c (a + i b).
///
/// # Safety
/// The instruction set is there.
#[inline(always)]
pub unsafe fn accumulate<V: Vector>(re: &mut V, im: &mut V, c: V, a: V, b: V, imaginary: bool) {
    // SAFETY: by contract.
    unsafe {
        if imaginary {
            (*re, *im) = (re.sub(c.mul(b)), im.add(c.mul(a)));
        } else {
            (*re, *im) = (re.add(c.mul(a)), im.add(c.mul(b)));
        }
    }
}
