//! What loops run through.

use super::refusal::{Place, Refusal};
use super::syntax::{Expression, Range};

type Outcome<T> = Result<T, Refusal>;

/// The values of a loop's variable, in order.
pub enum Values {
    /// The first, the distance to the next, and how many.
    Even(i64, i64, u64),
    Listed(Vec<i64>),
}

impl Values {
    /// Calculates a range; `whole` gives the whole number that an expression stands for.
    pub fn of(range: &Range, place: Place, whole: &dyn Fn(&Expression, Place) -> Outcome<i64>) -> Outcome<Self> {
        let span = match range {
            Range::Set(set) => {
                return set.iter().map(|value| whole(value, place)).collect::<Outcome<_>>().map(Self::Listed);
            }
            Range::Span(span) => span,
        };
        let place = span.place;
        let (Some(start), Some(stop)) = (&span.start, &span.stop) else {
            return Err(place.refuse("a range without its ends; write [0:9]"));
        };
        let (start, stop) = (whole(start, place)?, whole(stop, place)?);
        let step = span.step.as_ref().map_or(Ok(1), |step| whole(step, place))?;
        Ok(Self::Even(start, step, steps(start, step, stop, place)?))
    }

    pub fn count(&self) -> u64 {
        match self {
            Self::Even(_, _, count) => *count,
            Self::Listed(list) => list.len() as u64,
        }
    }

    pub fn at(&self, place: u64) -> i64 {
        match self {
            // Both ends are 64-bit numbers and this lies between them.
            Self::Even(start, step, _) => start.wrapping_add((place as i64).wrapping_mul(*step)),
            Self::Listed(list) => list[place as usize],
        }
    }
}

/// How many values a range has, both ends included.
pub fn steps(start: i64, step: i64, stop: i64, place: Place) -> Outcome<u64> {
    if step == 0 {
        return Err(place.refuse("a range with the step 0; give another step"));
    }
    let span = (i128::from(stop) - i128::from(start)) / i128::from(step);
    let backwards = (stop < start && step > 0) || (stop > start && step < 0);
    Ok(if backwards { 0 } else { u64::try_from(span + 1).unwrap_or(u64::MAX) })
}
