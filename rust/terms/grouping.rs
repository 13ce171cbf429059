//! Pairwise commutation and greedy commuting groups.

use super::Terms;
use super::algebra::Check;
use super::locality::Locality;
use crate::error::Result;
use crate::pauli::PauliString;

/// Terms between two questions to the check.
const TERMS_PER_CHECK: usize = 256;

impl Terms {
    /// The first pair of terms that does not commute: least second number, then least first number.
    ///
    /// # Errors
    ///
    /// What `check` returns.
    pub fn first_anticommuting_pair(&self, check: Check) -> Result<Option<(usize, usize)>> {
        let mut index = Locality::new();
        let mut near = Vec::new();
        for (number, &string) in self.strings().iter().enumerate() {
            if number % TERMS_PER_CHECK == 0 {
                check()?;
            }
            index.neighbours(string, &mut near);
            if let Some(&other) = near.iter().find(|&&other| !string.commutes_with(self.strings()[other as usize])) {
                return Ok(Some((other as usize, number)));
            }
            index.push(string);
        }
        Ok(None)
    }
}

/// Puts each string into the first group with all of whose members it commutes, opening a new one if there is none.
///
/// Returns the group number of each string. Groups are numbered in order of their first member.
///
/// # Errors
///
/// What `check` returns.
pub fn commuting_groups(strings: &[PauliString], check: Check) -> Result<Vec<usize>> {
    let mut index = Locality::new();
    let mut members: Vec<Vec<u32>> = Vec::new();
    // The number, plus one, of the last string that found a conflict in each group.
    let mut blocked: Vec<usize> = Vec::new();
    let mut group_of: Vec<usize> = Vec::with_capacity(strings.len());
    for (number, &string) in strings.iter().enumerate() {
        if number % TERMS_PER_CHECK == 0 {
            check()?;
        }
        let conflicts = |other: u32| !string.commutes_with(strings[other as usize]);
        let group = if index.neighbour_bound(string) < index.len() {
            index.each_neighbour(string, |other| {
                if conflicts(other) {
                    blocked[group_of[other as usize]] = number + 1;
                }
            });
            blocked.iter().position(|&by| by != number + 1)
        } else {
            // Dense strings meet half of all others, so a group shows a conflict after about two looks.
            members.iter().position(|group| !group.iter().any(|&other| conflicts(other)))
        };
        let group = group.unwrap_or(members.len());
        if group == members.len() {
            members.push(Vec::new());
            blocked.push(0);
        }
        members[group].push(number as u32);
        group_of.push(group);
        index.push(string);
    }
    Ok(group_of)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn groups_are_first_fit_and_the_first_conflict_is_reported() {
        let terms = Terms::parse("X_0 + Z_1 + Z_0 + X_0 X_1 + Y_0 Y_1 + Z_0 Z_1", None).unwrap();
        let groups = commuting_groups(terms.strings(), &mut || Ok(())).unwrap();
        assert_eq!(groups, [0, 0, 1, 2, 2, 1]);
        assert_eq!(terms.first_anticommuting_pair(&mut || Ok(())).unwrap(), Some((0, 2)));
    }
}
