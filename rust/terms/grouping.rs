//! Pairwise commutation and greedy commuting groups.

use super::Terms;
use super::algebra::Check;
use super::locality::Locality;
use crate::error::Result;
use crate::pauli::PauliString;

/// A group is scanned member by member rather than through the index when the index would return this many times more strings
/// than there are groups: dense strings meet half of all others, so a scan of a group finds a conflict after about two looks.
const DENSE_RATIO: usize = 16;

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
    let mut near = Vec::new();
    let mut members: Vec<Vec<u32>> = Vec::new();
    let mut blocked: Vec<usize> = Vec::new();
    let mut group_of = Vec::with_capacity(strings.len());
    for (number, &string) in strings.iter().enumerate() {
        if number % TERMS_PER_CHECK == 0 {
            check()?;
        }
        let conflicts = |other: &u32| !string.commutes_with(strings[*other as usize]);
        let group = if index.neighbour_bound(string) > DENSE_RATIO * (members.len() + 1) {
            members.iter().position(|group| !group.iter().any(conflicts))
        } else {
            index.neighbours(string, &mut near);
            for other in near.iter().copied().filter(conflicts) {
                blocked[group_of[other as usize]] = number + 1;
            }
            blocked.iter().position(|&by| by != number + 1)
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
