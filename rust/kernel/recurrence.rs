//! The Chebyshev recurrence, from the start to the sums.
//!
//! The vectors are kept as real and imaginary parts in turn for the whole run. Every second term enters the sums together
//! with the one before it, which is at hand as the source of the recurrence.
//!
//! A real start under a real operator runs folded (see [`crate::action`]): all T_k |start> are real, half as long, and enter
//! one of two real sums, that of even terms or that of odd ones, which are the real and the imaginary part of the result.

use num_complex::Complex64;

use super::Isa;
use super::act::{Buffers, ahead, each_coset, place, require_size};
use super::copies::{Copy, Fold, Unfold};
use super::image::{Coming, Ending, Gain, Old, Room, Turned, coset_image};
use super::lanes::Real;
use super::shared::Shared;
use super::tile::{Ahead, Place};
use crate::action::Action;
use crate::error::Result;
use crate::team::{Control, Member, Run, run, workers_for};

/// Vectors that a worker copies between two looks at the flags.
const PIECE: usize = 1 << 12;

/// Which terms a sum takes.
#[derive(Clone, Copy)]
enum Part {
    /// All, times (-i)^k.
    All,
    /// Those of even k, times (-i)^k.
    Even,
    /// Those of odd k, times (-i)^k / i.
    Odd,
}

/// A sum Σ_k a_k (-i)^k T_k, or a part of it.
struct Sum<'a> {
    vector: Shared<'a, f64>,
    coefficients: &'a [f64],
    part: Part,
}

impl Sum<'_> {
    /// What a term is multiplied by, if it enters.
    fn factor(&self, term: usize) -> Option<Turned<f64>> {
        let sign = if matches!(term & 3, 1 | 2) { -1.0 } else { 1.0 };
        let odd = term & 1 == 1;
        let imaginary = match self.part {
            Part::All => odd,
            Part::Even if odd => return None,
            Part::Odd if !odd => return None,
            Part::Even | Part::Odd => false,
        };
        Some(Turned { value: sign * self.coefficients[term], imaginary })
    }

    /// What it gains when a term is stored: an even term brings the one before along, which is the source.
    fn entering(&self, term: usize) -> Option<Entering<'_>> {
        let (own, source) = (self.factor(term), if term & 1 == 0 { self.factor(term - 1) } else { None });
        (own.is_some() || source.is_some()).then_some(Entering { vector: &self.vector, own, source })
    }
}

/// What a sum gains when a term is stored.
struct Entering<'a> {
    vector: &'a Shared<'a, f64>,
    own: Option<Turned<f64>>,
    source: Option<Turned<f64>>,
}

/// The recurrence behind [`crate::apply::chebyshev_sums`], on states of the right and least length.
///
/// # Errors
/// A stop on request, after which all arrays are unfinished.
pub fn chebyshev(
    action: &Action<f64>,
    current: &mut [Complex64],
    previous: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_size(action, [current.len(), previous.len()].into_iter().chain(sums.iter().map(|sum| sum.len())));
    let isa = Isa::chosen()?;
    let workers = workers_for(threads, current.len());
    let passes = (coefficients[0].len() - 1) as u64 * action.passes.len() as u64;
    control.expect(control.progress().0 + passes + 2);
    let buffers = [Shared::new(current), Shared::new(previous)];
    let with_lists = sums.iter_mut().zip(coefficients);
    let sums: Vec<Sum> =
        with_lists.map(|(sum, list)| Sum { vector: Shared::new(sum), coefficients: list, part: Part::All }).collect();
    run(workers, control, |member| {
        each_vector(member, &buffers[0], |from, vectors| {
            // SAFETY: pieces belong to one worker each, and the arrays are distinct; a vector is read before it is written.
            unsafe {
                let (from, to) = (whole(&buffers[0], from, true), whole(&buffers[0], from, false));
                isa.run_vectors(Copy { from, to, vectors, factor: None });
            }
            begin(isa, &buffers[0], &sums, from, vectors);
        })?;
        member.pass_done()?;
        recur(member, isa, action, &buffers, &sums)?;
        for sum in &sums {
            each_vector(member, &sum.vector, |from, vectors| {
                // SAFETY: pieces belong to one worker each; a vector is read before it is written.
                unsafe {
                    let (from, to) = (whole(&sum.vector, from, false), whole(&sum.vector, from, true));
                    isa.run_vectors(Copy { from, to, vectors, factor: None });
                }
            })?;
        }
        member.pass_done()
    })
}

/// The same for a real start, folded: `current` and `sums` have twice the length of the action's states, and the results end
/// up in `current` and all of `sums` but the last, in this order.
///
/// # Errors
/// As [`chebyshev`].
pub fn folded_chebyshev(
    action: &Action<f64>,
    current: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_size(action, std::iter::once(current.len() / 2).chain(sums.iter().map(|sum| sum.len() / 2)));
    let isa = Isa::chosen()?;
    let half = current.len() / 2;
    let workers = workers_for(threads, half);
    let passes = (coefficients[0].len() - 1) as u64 * action.passes.len() as u64;
    control.expect(control.progress().0 + passes + 1 + sums.len() as u64);
    let (first, second) = current.split_at_mut(half);
    let buffers = [Shared::new(first), Shared::new(second)];
    let mut parts = Vec::with_capacity(2 * sums.len());
    for (sum, list) in sums.iter_mut().zip(coefficients) {
        let (even, odd) = sum.split_at_mut(half);
        parts.push(Sum { vector: Shared::new(even), coefficients: list, part: Part::Even });
        parts.push(Sum { vector: Shared::new(odd), coefficients: list, part: Part::Odd });
    }
    run(workers, control, |member| {
        each_vector(member, &buffers[0], |from, vectors| {
            let place = from << (f64::LANE_BITS + 1);
            // SAFETY: pieces of the first buffer belong to one worker each and are read before they are written; the second
            // is only read.
            unsafe {
                let (low, high) = (buffers[0].at(place), buffers[1].at(place));
                isa.run_vectors(Fold { low, high, to: low, vectors });
            }
            begin(isa, &buffers[0], &parts, from, vectors);
        })?;
        member.pass_done()?;
        recur(member, isa, action, &buffers, &parts)?;
        let mut free = [&buffers[0], &buffers[1]];
        for pair in parts.chunks_exact(2) {
            let (even, odd) = (&pair[0].vector, &pair[1].vector);
            each_vector(member, even, |from, vectors| {
                let place = from << (f64::LANE_BITS + 1);
                // SAFETY: pieces belong to one worker each; the halves that are written are no longer needed and none of
                // those that are read.
                unsafe {
                    let [low, high] = free.map(|half| half.at(place));
                    isa.run_vectors(Unfold { even: even.at(place), odd: odd.at(place), low, high, vectors });
                }
            })?;
            member.pass_done()?;
            free = [even, odd];
        }
        Ok(())
    })
}

/// Begins sums with the first term, on a piece of the start.
fn begin(isa: Isa, start: &Shared<f64>, sums: &[Sum], from: usize, vectors: usize) {
    for sum in sums {
        let factor = Some((sum.factor(0).map_or(0.0, |factor| factor.value), 0.0));
        let (from, to) = (whole(start, from, false), whole(&sum.vector, from, false));
        // SAFETY: the piece belongs to this worker, and the arrays are distinct.
        unsafe { isa.run_vectors(Copy { from, to, vectors, factor }) };
    }
}

/// All terms but the first; `buffers` hold the start and room.
fn recur(member: &Member, isa: Isa, action: &Action<f64>, buffers: &[Shared<f64>; 2], sums: &[Sum]) -> Result<()> {
    let terms = sums.first().map_or(0, |sum| sum.coefficients.len());
    let mut room = Room::default();
    let last = action.passes.len() - 1;
    for term in 1..terms {
        let (read, write) = (&buffers[(term + 1) & 1], &buffers[term & 1]);
        let due = term & 1 == 0 || term + 1 == terms;
        for (number, pass) in action.passes.iter().enumerate() {
            let mut buffers = (!pass.space.is_contiguous()).then(|| Buffers::new(pass));
            let old = match (number, term) {
                (0, 1) => Old::Dropped,
                (0, _) => Old::Subtracted,
                _ => Old::Added,
            };
            let due = number == last && due;
            let entering: Vec<Entering> =
                if due { sums.iter().filter_map(|sum| sum.entering(term)).collect() } else { vec![] };
            let mut gains: Vec<Gain<f64>> = Vec::with_capacity(entering.len());
            let mut arriving: Vec<Ahead<f64>> = Vec::with_capacity(entering.len() + 2);
            each_coset(member, pass, read, |_, rep, next| {
                gains.clear();
                arriving.clear();
                gains.extend(entering.iter().map(|one| Gain {
                    sum: place(pass, one.vector, rep, false),
                    own: one.own,
                    source: one.source,
                }));
                if let Some(next) = next {
                    let read = buffers.is_none().then_some(read);
                    let arrays = read.into_iter().chain([write]).chain(entering.iter().map(|one| one.vector));
                    arriving.extend(arrays.map(|array| ahead(pass, array, next)));
                }
                let out = place(pass, write, rep, false);
                let ending = Ending::Store { out, old, halved: number == last && term == 1, gains: &gains };
                // SAFETY: each coset belongs to one worker; the arrays are distinct, and `read` is only read.
                unsafe {
                    let (source, refill) = match &mut buffers {
                        None => (read.at(2 * rep).cast_const(), None),
                        Some(buffers) => buffers.take(isa, |rep| place(pass, read, rep, false), rep, next),
                    };
                    let coming = Coming { fetched: &arriving, copied: refill };
                    coset_image(isa, pass, source, rep, ending, coming, &mut room);
                }
            })?;
            member.pass_done()?;
        }
    }
    Ok(())
}

fn each_vector(member: &Member, state: &Shared<f64>, mut work: impl FnMut(usize, usize)) -> Result<()> {
    member.each_piece(state.reals() >> (f64::LANE_BITS + 1), PIECE, |vectors| work(vectors.start, vectors.len()))
}

/// The state from a vector on.
fn whole(state: &Shared<f64>, vector: usize, interleaved: bool) -> Place<'static, f64> {
    // SAFETY: vectors are cut from the state.
    let start = unsafe { state.at(vector << (f64::LANE_BITS + 1)) };
    Place { start, origin: 0, layout: None, interleaved }
}
