//! One rotation alone, on amplitudes as they lie.
//!
//! A circuit of one rotation is bound by memory: to split real and imaginary parts for it, and to interleave them again, would
//! cost more than it gains. So a vector here holds neighbouring amplitudes as (re, im) pairs, and
//!
//! ```text
//! cos θ a - i sin θ P a = c a + w b,
//! ```
//!
//! lane by lane, with b the amplitudes of the partner vector in exchanged lanes and w = ± sin θ by lane: P multiplies by
//! a real or an imaginary number, and the latter exchanges real and imaginary parts. Worked example on three qubits, two
//! amplitudes a vector: X_0 Z_2 exchanges lanes (re_0, im_0, re_1, im_1) to (im_1, re_1, im_0, re_0) inside each vector, with
//! w = s (1, -1, 1, -1) in the vectors of amplitudes 0 … 3 and its negative in those of 4 … 7.
//!
//! Eight neighbouring vectors are a *group*: the partners of a group are the vectors of one other group (or its own), in an
//! order that is the same everywhere, and so are their signs but for one sign for the whole group.

use crate::kernel::lanes::Real;
use crate::operation::{Operation, sign_at_zero};

/// Vectors in a group.
pub const GROUP: usize = 8;

/// A rotation in terms of vectors of interleaved amplitudes.
#[derive(Clone, Debug)]
pub struct Single<T: Real> {
    /// cos θ.
    pub cosine: T,
    /// The group of partners is group ^ this.
    pub groups: usize,
    /// Vector j of a group has its partner in vector j ^ this.
    pub within: usize,
    /// Lane l takes from lane l ^ this.
    pub lanes: usize,
    /// The parity of a group's number with this is its sign.
    pub sign: usize,
    /// w for the vectors of groups with even and with odd parity.
    pub factors: [[T::Line; GROUP]; 2],
}

impl<T: Real> Single<T> {
    /// The only rotation of an operation, if there is only one.
    pub fn new(operation: &Operation) -> Option<Self> {
        let rotation = match (&operation.mixing[..], &operation.diagonal[..]) {
            ([rotation], []) | ([], [rotation]) => rotation,
            _ => return None,
        };
        let (x, z) = (rotation.string.x as usize, rotation.string.z as usize);
        let real = rotation.string.y_count() & 1 == 1;
        let (sin, cos) = libm::sincos(rotation.angle);
        let sin = sin * sign_at_zero(rotation);
        // A vector has one bit less of the amplitude's index than it has lanes.
        let vector_bits = T::LANE_BITS - 1;
        let group_bits = vector_bits + GROUP.ilog2();
        let mut factors = [[T::Line::default(); GROUP]; 2];
        for (parity, lines) in factors.iter_mut().enumerate() {
            for (vector, line) in lines.iter_mut().enumerate() {
                for (lane, value) in line.as_mut().iter_mut().enumerate() {
                    let index = vector << vector_bits | lane >> 1;
                    let odd = (index & z).count_ones() as usize + parity + usize::from(!real && lane & 1 == 1);
                    *value = T::from_f64(if odd & 1 == 1 { -sin } else { sin });
                }
            }
        }
        Some(Self {
            cosine: T::from_f64(cos),
            groups: x >> group_bits,
            within: x >> vector_bits & (GROUP - 1),
            lanes: (x & ((1 << vector_bits) - 1)) << 1 | usize::from(!real),
            sign: z >> group_bits,
            factors,
        })
    }
}
