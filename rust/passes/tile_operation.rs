//! Operations in the coordinates of a coset and a tile.
//!
//! An [`Action`] becomes a form of arithmetic with a register mask, a lane mask, and coefficients by entry: the parities of a base
//! and a representative choose the entry, register and lane flip it. Worked example: see [`crate::kernel::tile`].

use num_complex::Complex64;

use super::diagonal::Diagonal;
use super::space::Space;
use super::tiles::{ONE, TILE};
use crate::kernel::lanes::Real;
use crate::operation::{Action, PARITIES};

/// Which arithmetic an operation needs on the registers of a tile.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Form {
    /// a + γ (b - a) for active registers.
    Exchange,
    /// Sums and differences for active registers, a - i t b for the others.
    Bond,
    /// a - i t b with one t for all.
    Mix,
    /// a + w t b.
    Turn,
    /// c a + w s b.
    Table,
    /// a + γ (b - a) with γ by lane.
    LaneExchange,
    /// c a + s b with complex c and s by lane.
    Complex,
    /// A number times everything.
    Scale,
    /// Phases from the tables of a diagonal.
    Diagonal,
}

/// Partner masks of registers times classes of active registers.
pub const ARMS: usize = 64;

/// Registers that an arm's bonds are active in. Arm `8 x + 2 i + s` mixes register t with t ^ x where the parity of `t & z_i`
/// differs from s: z_0 … z_3 are the masks that x overlaps evenly, since both partners are active or none.
pub const ACTIVE: [u8; ARMS] = {
    let mut table = [0u8; ARMS];
    let mut place = 8;
    while place < ARMS {
        let z = even_mask(place / 8, place / 2 % 4);
        let mut t = 0;
        while t < TILE {
            if ((t & z).count_ones() as usize & 1) ^ (place & 1) == 1 {
                table[place] |= 1 << t;
            }
            t += 1;
        }
        place += 1;
    }
    table
};

/// The `number`-th mask that x overlaps evenly.
const fn even_mask(x: usize, mut number: usize) -> usize {
    let mut z = 0;
    loop {
        if (z & x).count_ones() & 1 == 0 {
            if number == 0 {
                return z;
            }
            number -= 1;
        }
        z += 1;
    }
}

/// The arm of a bond for entry 0.
fn arm(x: usize, z: usize) -> usize {
    let number = (0..4).find(|&number| even_mask(x, number) == z);
    8 * x + 2 * number.expect("the mask of a bond overlaps its x mask evenly")
}

/// An operation on the registers of a tile.
#[derive(Clone, Debug)]
pub struct TileOperation<T: Real> {
    /// The arithmetic.
    pub form: Form,
    /// Whether partners enter with a real factor (`Turn`, `Table`).
    pub real: bool,
    /// Register t mixes with register t ^ x.
    pub x: usize,
    /// Lane l mixes with lane l ^ m.
    pub m: usize,
    /// Coefficients that are the same for all lanes; the place of the tables for `Diagonal`.
    pub numbers: [T; 5],
    /// Place among the diagonals of the pass.
    pub diagonal: usize,
    /// Coefficients by lane, some lines for each entry.
    pub lines: Vec<T::Line>,
    /// Lines of an entry, as a power of two.
    pub width_bits: u32,
    /// Parity masks over the vectors of a coset, one for each bit of an entry's number.
    pub masks: Vec<usize>,
    /// Parity masks over representatives.
    pub coset_masks: Vec<usize>,
    /// What register t adds to the entry's number, by exclusive or.
    pub register_entry: [usize; TILE],
    /// The same, counted in lines.
    pub register_line: [usize; TILE],
    /// For [`Form::Exchange`] and [`Form::Bond`], which registers are active: see [`ACTIVE`].
    pub arm: usize,
    /// Entries that leave everything as it is.
    pub idle: u16,
}

fn is_odd(masked: usize) -> bool {
    masked.count_ones() & 1 == 1
}

impl<T: Real> TileOperation<T> {
    /// Products and sums of reals for each amplitude, on average.
    pub fn arithmetic(&self, diagonals: &[Diagonal<T>]) -> f64 {
        match self.form {
            // Half of the amplitudes, in pairs: 4 sums, a product of complex numbers (6), 2 sums.
            Form::Exchange => 0.5 * 0.5 * 12.0,
            // Half in pairs with 8 sums and two complex products, half with 4 operations each.
            Form::Bond => 0.5 * 0.5 * 20.0 + 0.5 * 4.0,
            Form::Mix | Form::Turn => 4.0,
            Form::Table => {
                let entries = 1usize << self.masks.len();
                6.0 * (1.0 - f64::from(self.idle.count_ones()) / entries as f64)
            }
            Form::LaneExchange => 10.0,
            Form::Complex => 14.0,
            Form::Scale => 6.0,
            Form::Diagonal => 12.0 + 8.0 * diagonals[self.diagonal].groups.len() as f64,
        }
    }

    /// A form with no mask and no coefficient.
    pub fn plain(form: Form) -> Self {
        Self {
            form,
            real: false,
            x: 0,
            m: 0,
            numbers: [T::default(); 5],
            diagonal: 0,
            lines: vec![],
            width_bits: 0,
            masks: vec![],
            coset_masks: vec![],
            register_entry: [0; TILE],
            register_line: [0; TILE],
            arm: 0,
            idle: 0,
        }
    }

    /// A number times everything.
    pub fn scale(factor: Complex64) -> Self {
        let mut operation = Self::plain(Form::Scale);
        operation.set_numbers(&[factor.re, factor.im]);
        operation
    }

    fn set_numbers(&mut self, values: &[f64]) {
        self.numbers.iter_mut().zip(values).for_each(|(own, value)| *own = T::from_f64(*value));
    }

    /// An operation that mixes, in the coordinates of a coset and a tile, and the factor of everything that it leaves to do.
    pub fn new(space: &Space, tile: &Space, x: u64, action: &Action) -> (Self, Complex64) {
        let local = space.coordinates(x);
        let m = local & ((1 << T::LANE_BITS) - 1);
        let x = tile.coordinates((local >> T::LANE_BITS) as u64);
        let sees_lanes = |mask: &u64| space.dual(*mask) & ((1 << T::LANE_BITS) - 1) != 0;
        let lanes = match action {
            Action::Exchange { mask, .. } | Action::Bond { mask, .. } => m != 0 || sees_lanes(mask),
            _ => false,
        };
        let (mut operation, factor) = match action {
            Action::Exchange { mask, gamma, factor } if lanes => {
                let entry = |odd: bool| if odd { vec![gamma.re, gamma.im] } else { vec![0.0, 0.0] };
                (Self::by_parity(Form::LaneExchange, space, tile, &[*mask], |parities| entry(parities == 1)), *factor)
            }
            Action::Exchange { mask, gamma, factor } => {
                let mut operation = Self::by_parity(Form::Exchange, space, tile, &[*mask], |_| vec![]);
                operation.set_numbers(&[gamma.re, gamma.im]);
                (operation, *factor)
            }
            Action::Bond { mask, plus, minus, tangent, factor } if lanes => {
                let odd = vec![(plus + minus).re, (plus + minus).im, (plus - minus).re, (plus - minus).im];
                let even = vec![1.0, 0.0, 0.0, -tangent];
                let entry = |parities: usize| if parities == 1 { odd.clone() } else { even.clone() };
                (Self::by_parity(Form::Complex, space, tile, &[*mask], entry), *factor)
            }
            Action::Bond { mask, plus, minus, tangent, factor } => {
                let mut operation = Self::by_parity(Form::Bond, space, tile, &[*mask], |_| vec![]);
                operation.set_numbers(&[plus.re, plus.im, minus.re, minus.im, *tangent]);
                (operation, *factor)
            }
            Action::Turn { mask: 0, tangent, cosine, .. } => {
                let mut operation = Self::plain(Form::Mix);
                operation.set_numbers(&[*tangent]);
                (operation, ONE * cosine)
            }
            Action::Turn { mask, tangent, cosine, .. } => {
                let signed = |parities: usize| vec![if parities == 1 { -tangent } else { *tangent }];
                (Self::by_parity(Form::Turn, space, tile, &[*mask], signed), ONE * cosine)
            }
            Action::Table { masks, entries, .. } => {
                let entry = |parities: usize| vec![entries[parities].0, entries[parities].1];
                (Self::by_parity(Form::Table, space, tile, masks, entry), ONE)
            }
            Action::Complex { mask, entries } => {
                let entry = |parities: usize| {
                    let (c, s) = entries[parities];
                    vec![c.re, c.im, s.re, s.im]
                };
                (Self::by_parity(Form::Complex, space, tile, &[*mask], entry), ONE)
            }
            Action::Diagonal(_) => unreachable!("diagonal operations have tables of their own"),
        };
        operation.real = matches!(action, Action::Turn { real: true, .. } | Action::Table { real: true, .. });
        (operation.x, operation.m) = (x, m);
        if matches!(operation.form, Form::Exchange | Form::Bond) {
            let seen = |t: usize| operation.register_entry[t] & 1;
            operation.arm = arm(x, seen(1) | seen(2) << 1 | seen(4) << 2);
        }
        if let (Action::Table { entries, .. }, true) = (action, operation.parities_are_lane_free()) {
            let idle = |(e, entry): (usize, &(f64, f64))| u16::from(*entry == (1.0, 0.0)) << e;
            operation.idle = entries.iter().enumerate().map(idle).sum();
        }
        (operation, factor)
    }

    fn parities_are_lane_free(&self) -> bool {
        // Each line then holds one value.
        self.lines.iter().all(|line| line.as_ref().iter().all(|value| *value == line.as_ref()[0]))
    }

    /// Lines of coefficients by parities of the index, laid out for registers and lanes.
    fn by_parity(form: Form, space: &Space, tile: &Space, masks: &[u64], entry: impl Fn(usize) -> Vec<f64>) -> Self {
        debug_assert!(masks.len() <= PARITIES);
        let locals: Vec<usize> = masks.iter().map(|mask| space.dual(*mask)).collect();
        let vectors: Vec<usize> = locals.iter().map(|local| local >> T::LANE_BITS).collect();
        let bits = |odd: &dyn Fn(usize) -> bool| (0..masks.len()).map(|j| usize::from(odd(j)) << j).sum::<usize>();
        let mut operation = Self::plain(form);
        for t in 0..TILE {
            let vector = tile.vector(t) as usize;
            operation.register_entry[t] = bits(&|j| is_odd(vector & vectors[j]));
        }
        let width = entry(0).len();
        debug_assert!(width == 0 || width.is_power_of_two());
        operation.width_bits = width.max(1).ilog2();
        operation.register_line = operation.register_entry.map(|number| number << operation.width_bits);
        operation.lines = vec![T::Line::default(); width << masks.len()];
        if width > 0 {
            for number in 0..1usize << masks.len() {
                for lane in 0..1usize << T::LANE_BITS {
                    let values = entry(number ^ bits(&|j| is_odd(lane & locals[j])));
                    for (line, value) in operation.lines[number * width..].iter_mut().zip(values) {
                        line.as_mut()[lane] = T::from_f64(value);
                    }
                }
            }
        }
        operation.masks = vectors;
        operation.coset_masks = masks.iter().map(|mask| if space.leaves(*mask) { *mask as usize } else { 0 }).collect();
        operation
    }
}
