//! A bound on the spectral norm from groups of strings that anticommute pairwise.
//!
//! Where all of P_1 … P_m anticommute with each other, (Σ c_j P_j)² = Σ c_j², so the group has norm √(Σ c_j²). A sum of
//! groups is bounded by the triangle inequality, whatever the grouping.
//!
//! The grouping is greedy and local: strings are taken by their lowest qubit and then by falling |c|, since a group of equal
//! sizes gains most, and each joins the first of the latest [`OPEN`] groups of its lowest qubit with all of whose members
//! it anticommutes. A search over all groups that share a qubit was tried: a third tighter on chains, and a hundred times slower.

use super::Terms;
use super::algebra::Check;
use crate::error::Result;
use crate::pauli::PauliString;

/// Groups that a string is compared with.
const OPEN: usize = 64;

/// Strings between two looks for a request to stop: some milliseconds of work.
const STRINGS_PER_CHECK: usize = 1 << 13;

impl Terms {
    /// The bound of this module, and the number of groups. A single group is the exact norm.
    ///
    /// # Errors
    ///
    /// What `check` returns.
    pub fn anticommuting_norm(&self, check: Check) -> Result<(f64, usize)> {
        let mut sorted: Vec<(u32, f64, PauliString)> =
            self.iter().map(|(string, value)| (string.support().trailing_zeros(), value.abs(), string)).collect();
        // A stable sort, so that equal entries keep the order of the terms.
        sorted.sort_by(|a, b| a.0.cmp(&b.0).then(b.1.total_cmp(&a.1)));
        let mut total = 0.0;
        let mut count = 0;
        let mut seen = 0;
        for window in sorted.chunk_by(|a, b| a.0 == b.0) {
            let largest = window[0].1;
            // Members, and the sum of squares over the square of the largest, so that nothing overflows.
            let mut groups: Vec<(Vec<PauliString>, f64)> = Vec::new();
            for &(_, size, string) in window {
                if seen % STRINGS_PER_CHECK == 0 {
                    check()?;
                }
                seen += 1;
                let oldest = groups.len().saturating_sub(OPEN);
                let square = (size / largest).powi(2);
                let fits = |members: &[PauliString]| !members.iter().any(|&member| member.commutes_with(string));
                match groups[oldest..].iter_mut().find(|(members, _)| fits(members)) {
                    Some((members, squares)) => {
                        members.push(string);
                        *squares += square;
                    }
                    None => groups.push((vec![string], square)),
                }
            }
            total += largest * groups.iter().map(|(_, squares)| squares.sqrt()).sum::<f64>();
            count += groups.len();
        }
        // Each of up to n additions, a division, a square, a root and a product round by half an epsilon.
        let rounding = 1.0 + f64::EPSILON * (self.len() as f64 + 8.0);
        Ok((total * rounding, count))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn bound(text: &str) -> (f64, usize) {
        Terms::parse(text, None).unwrap().anticommuting_norm(&mut || Ok(())).unwrap()
    }

    #[test]
    fn anticommuting_strings_add_in_squares_and_others_plainly() {
        for (text, value, groups) in [
            ("3 X_0 + 4 Z_0", 5.0, 1),
            ("3 X_0 + 4 Z_1", 7.0, 2),
            ("2 X_0 + 2 Y_0 + 1 Z_0 + 5 Z_1", 8.0, 2),
            ("3 X_0 X_1 + 4 Z_0 + 2 X_1", 7.0, 2),
            ("0", 0.0, 0),
        ] {
            let (found, count) = bound(text);
            assert!(found >= value && found <= value * (1.0 + 1e-14), "{text}: {found}");
            assert_eq!(count, groups, "{text}");
        }
    }
}
