//! An operator sorted for its application to a state: out = (scale · H + shift) ψ.
//!
//! Terms with one x mask read the same amplitude, so they are one *addend*: a coefficient that depends on a few parities
//! of the index, times the amplitude at `k ^ x`. XX and YY of a bond cost one, and nothing where they cancel; all diagonal
//! terms together are one real number for each index ([`DiagonalSum`]).
//!
//! As for rotations ([`crate::passes`]), addends are sorted into passes over cosets: a coset of the state is taken into
//! cache, and a tile of eight vectors of the result stays in registers while all addends of the pass are added to it. The first
//! pass works on contiguous blocks and has the diagonal; later ones add to what is there. Worked example on three qubits,
//! H = X_0 + X_2 with blocks of two qubits: the first pass adds X_0 inside {0 … 3} and {4 … 7}, the second adds X_2 inside the
//! cosets of the span of 0b001 and 0b100.
//!
//! *Folded.* A real operator (every string has an even number of Y) keeps real states real, and a real state of n qubits is
//! half as much to carry as a complex one. It is folded into a complex vector of n - 1 qubits: amplitudes with top qubit 0 are
//! its real parts, those with top qubit 1 its imaginary parts. All kernels then work as they are, and the few terms that act
//! on the top qubit tell real from imaginary parts: an x mask with it exchanges the two, a z mask with it gives them different
//! coefficients. On three qubits X_2 X_0 folds into X_0 with the parts exchanged, Z_2 into +1 for real and -1 for imaginary parts.

use std::sync::Arc;

use crate::kernel::lanes::Real;
use crate::operation::{PARITIES, coordinates, independent, sign_at_zero};
use crate::passes::diagonal::DiagonalSum;
use crate::passes::layout::Layout;
use crate::passes::least_qubits;
use crate::passes::space::{Space, Span};
use crate::passes::tiles::{TILE, TILE_BITS};
use crate::rotations::Rotation;
use crate::terms::Terms;

/// Vectors in a coset, as a power of two.
const COSET_BITS: u32 = 10;
/// Vectors, as powers of two, that a coset reads in one run at least: the second where it costs no more passes, since long
/// runs are faster to read.
const RUN_BITS: [u32; 2] = [2, 3];
/// Tiles, as a power of two, over which the parities of addends are prepared at once.
pub const STRETCH_BITS: u32 = 4;

/// A coefficient by parities times the amplitude at `k ^ x`.
#[derive(Clone, Debug)]
pub struct Addend<T: Real> {
    /// Vector v takes from vector v ^ x of the coset.
    pub x: usize,
    /// Lane l takes from lane l ^ m.
    pub m: usize,
    /// The coefficient carries a factor i.
    pub imaginary: bool,
    /// Parity masks over the vectors of a coset, one for each bit of an entry's number.
    pub masks: Vec<usize>,
    /// Parity masks over representatives.
    pub coset_masks: Vec<usize>,
    /// What register t of a tile adds to the entry's number, by exclusive or.
    pub register_entry: [usize; TILE],
    /// Whether all registers see the same entry.
    pub uniform: bool,
    /// What tile q of a stretch adds to the entry's number.
    pub tile_entry: [u8; 1 << STRETCH_BITS],
    /// Coefficients where all lanes share them.
    pub values: [T; 1 << PARITIES],
    /// Coefficients by lane, where they do not; else empty.
    pub lines: Vec<T::Line>,
    /// Entries that are zero.
    pub idle: u16,
    /// Folded: real parts take from imaginary ones, and these from real ones.
    pub swapped: bool,
    /// Folded: what imaginary parts add to the entry's number, by exclusive or.
    pub im_entry: usize,
}

/// Addends that work on one coset at a time.
#[derive(Clone, Debug)]
pub struct ActionPass<T: Real> {
    /// The space whose cosets it works on.
    pub space: Arc<Space>,
    /// Where a coset lies in the state.
    pub layout: Arc<Layout>,
    /// What is added.
    pub addends: Vec<Addend<T>>,
    /// The diagonal, in the first pass.
    pub diagonal: Option<DiagonalSum<T>>,
    /// Folded: the diagonal of imaginary parts, where it is another.
    pub im_diagonal: Option<DiagonalSum<T>>,
}

/// An operator `scale · H + shift`, ready to be applied.
pub struct Action<T: Real> {
    /// Qubits of the states that it acts on: those of the operator, or one less where it is folded.
    pub qubits: u32,
    /// Passes over the state, at least one.
    pub passes: Vec<ActionPass<T>>,
    rounding: f64,
}

/// Terms with one x mask and one kind of coefficient, depending on at most [`PARITIES`] parities.
struct Gathered {
    x: u64,
    imaginary: bool,
    masks: Vec<u64>,
    terms: Vec<Rotation>,
    swapped: bool,
}

impl Gathered {
    /// Takes the top qubit out of the x mask. Parity masks keep it: it tells imaginary from real parts.
    fn fold(&mut self, top: u64) {
        self.swapped = self.x & top != 0;
        self.x &= !top;
    }

    fn size(&self) -> f64 {
        self.terms.iter().map(|term| term.angle.abs()).sum()
    }

    /// The coefficient where the parities of the index with the masks are the bits of `parities`.
    fn coefficient(&self, parities: usize) -> f64 {
        let one = |term: &Rotation| {
            let odd = coordinates(&self.masks, term.string.z as u64) & parities;
            term.angle * if odd.count_ones() & 1 == 1 { -1.0 } else { 1.0 } * sign_at_zero(term)
        };
        self.terms.iter().map(one).sum()
    }
}

fn gather(terms: &Terms, scale: f64) -> (Vec<Gathered>, Vec<(u64, f64)>) {
    let (mut gathered, mut diagonal): (Vec<Gathered>, Vec<(u64, f64)>) = (vec![], vec![]);
    for (string, coefficient) in terms.iter() {
        let term = Rotation { string, angle: scale * coefficient };
        let (x, z, imaginary) = (string.x as u64, string.z as u64, string.y_count() & 1 == 1);
        if x == 0 {
            diagonal.push((z, term.angle));
            continue;
        }
        let joins = |own: &&mut Gathered| {
            own.x == x
                && own.imaginary == imaginary
                && independent(own.masks.iter().copied().chain([z])).len() <= PARITIES
        };
        match gathered.iter_mut().rev().find(joins) {
            Some(own) => {
                own.masks = independent(own.masks.iter().copied().chain([z]));
                own.terms.push(term);
            }
            None => {
                let masks = independent([z].into_iter());
                gathered.push(Gathered { x, imaginary, masks, terms: vec![term], swapped: false });
            }
        }
    }
    (gathered, diagonal)
}

impl<T: Real> Action<T> {
    /// Prepares `scale · terms + shift`.
    pub fn new(terms: &Terms, scale: f64, shift: f64) -> Self {
        let mut actions = Self::prepared(&[terms], scale, shift, None);
        actions.remove(0)
    }

    /// Prepares `scale · terms + shift` for folded real states; None where the terms are not real or the states too short.
    pub fn folded(terms: &Terms, scale: f64, shift: f64) -> Option<Self> {
        if terms.qubits() <= least_qubits::<T>() || !terms.is_real() {
            return None;
        }
        Self::prepared(&[terms], scale, shift, Some(1 << (terms.qubits() - 1))).pop()
    }

    /// Prepares several operators on one number of qubits so that all have their passes over the same spaces.
    pub fn together(operators: &[&Terms]) -> Vec<Self> {
        Self::prepared(operators, 1.0, 0.0, None)
    }

    /// `top` is the bit of the qubit to fold.
    fn prepared(operators: &[&Terms], scale: f64, shift: f64, top: Option<u64>) -> Vec<Self> {
        let own = |terms: &Terms| terms.qubits() - u32::from(top.is_some());
        let qubits = operators.iter().map(|terms| own(terms)).max().unwrap_or(0).max(least_qubits::<T>());
        let (mut left, mut diagonals): (Vec<_>, Vec<_>) = operators.iter().map(|terms| gather(terms, scale)).unzip();
        if shift != 0.0 {
            diagonals.iter_mut().for_each(|diagonal: &mut Vec<(u64, f64)>| diagonal.push((0, shift)));
        }
        let top = top.unwrap_or(0);
        left.iter_mut().flatten().for_each(|gathered: &mut Gathered| gathered.fold(top));
        let new = |terms: &&Terms| Self { qubits: own(terms), passes: vec![], rounding: 0.0 };
        let mut actions: Vec<Self> = operators.iter().map(new).collect();
        let mut members: Vec<Vec<Vec<Gathered>>> = operators.iter().map(|_| vec![]).collect();
        let limit = (COSET_BITS + T::LANE_BITS).min(qubits);
        let masks: Vec<u64> = left.iter().flatten().map(|own| own.x).collect();
        let [short, long] = RUN_BITS.map(|bits| spans(limit, T::LANE_BITS + bits, &masks));
        for span in if long.len() <= short.len() { long } else { short } {
            let taken: Vec<Vec<Gathered>> = left.iter_mut().map(|own| take(own, &span)).collect();
            let space = Space::new(span.filled(limit));
            let layout = Arc::new(Layout::sequence::<T>(&space));
            let space = Arc::new(space);
            for (((action, taken), diagonal), members) in
                actions.iter_mut().zip(taken).zip(&diagonals).zip(&mut members)
            {
                action.push(&space, &layout, &taken, diagonal, top);
                members.push(taken);
            }
        }
        for ((action, members), diagonal) in actions.iter_mut().zip(&members).zip(&diagonals) {
            action.rounding = rounding(&action.passes, members, diagonal);
        }
        actions
    }

    fn push(
        &mut self,
        space: &Arc<Space>,
        layout: &Arc<Layout>,
        taken: &[Gathered],
        diagonal: &[(u64, f64)],
        top: u64,
    ) {
        let addends = taken.iter().map(|own| Addend::new(space, own, top)).collect();
        let first = self.passes.is_empty() && !diagonal.is_empty();
        let part = |sign: f64| {
            let one = |(z, value): &(u64, f64)| (z & !top, if z & top == 0 { *value } else { sign * value });
            DiagonalSum::new(&diagonal.iter().map(one).collect::<Vec<_>>(), space)
        };
        let sum = first.then(|| part(1.0));
        let im_diagonal = (first && diagonal.iter().any(|(z, _)| z & top != 0)).then(|| part(-1.0));
        let (space, layout) = (Arc::clone(space), Arc::clone(layout));
        self.passes.push(ActionPass { space, layout, addends, diagonal: sum, im_diagonal });
    }

    /// Bound on the 2-norm of the rounding error of one application to a unit vector, in units of the roundoff.
    ///
    /// Each term is rounded once when scaled, once for each sum of coefficients that it enters, once when multiplied, and once
    /// for each addition of amplitudes that it passes through; the error is at most the sum of |coefficient| times that
    /// number, since a string only permutes amplitudes and changes their phase by a power of i. A unit vector that a
    /// recurrence subtracts is rounded once a pass.
    pub fn rounding(&self) -> f64 {
        self.rounding
    }

    /// The same for one operator among several that were prepared [`Action::together`], whatever the others are.
    pub fn shared_rounding(terms: &Terms) -> f64 {
        let (gathered, diagonal) = gather(terms, 1.0);
        let additions = gathered.len() + 1;
        let mixed = gathered.iter().map(|own| own.size() * (2 + own.terms.len() + additions) as f64).sum::<f64>();
        let size: f64 = diagonal.iter().map(|(_, coefficient)| coefficient.abs()).sum();
        // A diagonal is summed from numbers of four kinds and at most one for each of its terms.
        mixed + size * (6 + 2 * diagonal.len() + additions) as f64
    }
}

/// The spaces of all passes, of dimensions up to `limit`, for addends with these x masks: the first of the lowest qubits, in
/// those after it memory is read in runs of 2^`run_bits` amplitudes.
fn spans(limit: u32, run_bits: u32, masks: &[u64]) -> Vec<Span> {
    let mut left = masks.to_vec();
    let mut spans = vec![];
    while spans.is_empty() || !left.is_empty() {
        let mut span = Span::of_low_bits(if spans.is_empty() { limit } else { run_bits.min(limit) });
        left.retain(|mask| !span.admit(*mask, limit));
        spans.push(span);
    }
    spans
}

/// Takes out what lies in the span, in order.
fn take(left: &mut Vec<Gathered>, span: &Span) -> Vec<Gathered> {
    let (taken, rest) = std::mem::take(left).into_iter().partition(|own| span.contains(own.x));
    *left = rest;
    taken
}

fn rounding<T: Real>(passes: &[ActionPass<T>], members: &[Vec<Gathered>], diagonal: &[(u64, f64)]) -> f64 {
    let count = |pass: usize| passes[pass].addends.len() + usize::from(passes[pass].diagonal.is_some());
    let later = |pass: usize| passes.len() - pass;
    let mixed = members.iter().enumerate().flat_map(|(pass, taken)| {
        let places = taken.iter().enumerate();
        places.map(move |(place, own)| own.size() * (2 + own.terms.len() + count(pass) - place + later(pass)) as f64)
    });
    let steps = passes[0].diagonal.as_ref().map_or(0, DiagonalSum::additions);
    let size: f64 = diagonal.iter().map(|(_, coefficient)| coefficient.abs()).sum();
    passes.len() as f64 + mixed.sum::<f64>() + size * (2 + diagonal.len() + steps + count(0) + later(0)) as f64
}

fn is_odd(masked: usize) -> bool {
    masked.count_ones() & 1 == 1
}

impl<T: Real> Addend<T> {
    fn new(space: &Space, gathered: &Gathered, top: u64) -> Self {
        let local = space.coordinates(gathered.x);
        let lane_mask = (1usize << T::LANE_BITS) - 1;
        let im_entry = gathered.masks.iter().enumerate().map(|(j, mask)| usize::from(mask & top != 0) << j).sum();
        let parities: Vec<u64> = gathered.masks.iter().map(|mask| mask & !top).collect();
        let duals: Vec<usize> = parities.iter().map(|mask| space.dual(*mask)).collect();
        let masks: Vec<usize> = duals.iter().map(|dual| dual >> T::LANE_BITS).collect();
        let entry = |vector: usize| -> usize {
            masks.iter().enumerate().map(|(j, mask)| usize::from(is_odd(vector & mask)) << j).sum()
        };
        let register_entry: [usize; TILE] = std::array::from_fn(entry);
        let tile_entry = std::array::from_fn(|q| entry(q << TILE_BITS) as u8);
        let coefficients: Vec<f64> = (0..1 << masks.len()).map(|parities| gathered.coefficient(parities)).collect();
        let m = local & lane_mask;
        let by_lane = m != 0 || duals.iter().any(|dual| dual & lane_mask != 0);
        let mut values = [T::default(); 1 << PARITIES];
        values.iter_mut().zip(&coefficients).for_each(|(value, c)| *value = T::from_f64(*c));
        let mut lines = vec![];
        let mut idle = 0;
        if by_lane {
            lines = vec![T::Line::default(); coefficients.len()];
            for (number, line) in lines.iter_mut().enumerate() {
                for (lane, value) in line.as_mut().iter_mut().enumerate() {
                    let odd = |(j, dual): (usize, &usize)| usize::from(is_odd(lane & dual)) << j;
                    let own: usize = duals.iter().enumerate().map(odd).sum();
                    *value = T::from_f64(coefficients[number ^ own]);
                }
            }
        } else {
            idle = coefficients.iter().enumerate().map(|(e, c)| u16::from(*c == 0.0) << e).sum();
        }
        // Tiles of a stretch are told apart by `tile_entry`, those of different stretches by the masks.
        let within = (1usize << (TILE_BITS + STRETCH_BITS)) - 1;
        Self {
            x: local >> T::LANE_BITS,
            m,
            imaginary: gathered.imaginary,
            coset_masks: parities.iter().map(|z| if space.leaves(*z) { *z as usize } else { 0 }).collect(),
            register_entry,
            uniform: register_entry == [register_entry[0]; TILE],
            tile_entry,
            values,
            lines,
            idle,
            swapped: gathered.swapped,
            im_entry,
            masks: masks.iter().map(|mask| mask & !within).collect(),
        }
    }
}
