//! One rotation, amplitude by amplitude: the slow, obvious twin of the kernels, used as their oracle.

use num_complex::Complex64;

use crate::rotations::Rotation;

/// Applies exp(-i θ P) = cos θ - i sin θ P, reading P |k> = i^{|x & z|} (-1)^{|k & z|} |k ^ x> off its definition.
pub fn rotate(amplitudes: &mut [Complex64], rotation: &Rotation) {
    let (x, z) = (rotation.string.x as usize, rotation.string.z as usize);
    let (sin, cos) = libm::sincos(rotation.angle);
    let minus_i_sin = Complex64::new(0.0, -sin);
    let before = amplitudes.to_vec();
    for (j, amplitude) in amplitudes.iter_mut().enumerate() {
        let source = j ^ x;
        let sign = if (source & z).count_ones() & 1 == 1 { -1.0 } else { 1.0 };
        *amplitude =
            before[j] * cos + minus_i_sin * Complex64::i().powu(rotation.string.y_count()) * before[source] * sign;
    }
}
