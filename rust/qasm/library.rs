//! The gates that need no definition, as data: each a product of quarter turns and rotations, with its exact phase.
//!
//! Sources: OpenQASM 3.0 and 3.1, `stdgates.inc` and the built-in gates (A. Cross et al., ACM Trans. Quantum Comput. 3, 12
//! (2022)); OpenQASM 2, `qelib1.inc` (A. Cross, L. Bishop, J. Smolin, J. Gambetta, arXiv:1707.03429 (2017)). Where those
//! disagree: rx, ry and rz turn by half the angle; cu is that of `stdgates.inc`, e^{i(γ-θ/2)} U on the target; U is the
//! 2π-periodic one in version 3 and rz ry rz in version 2, which leaves the global phase open.

use Move::{Angle, Eighths, Phase, Quarter, Swap};

/// A step of a gate. Masks count the gate's own qubits, the first argument being bit 0; angles are sums of the gate's
/// parameters with these weights, and a constant.
#[derive(Clone, Copy, Debug)]
pub enum Move {
    /// exp(-i π/4 turns P), P by its x and z masks.
    Quarter(u8, u8, u8),
    /// exp(-i θ P) with θ by weights.
    Angle(u8, u8, [f64; 5]),
    /// e^{iφ} with φ by weights.
    Phase([f64; 5]),
    /// e^{iπ/4} as often as said.
    Eighths(u8),
    /// Two qubits trade places.
    Swap(u8, u8),
}

/// A gate of a library.
#[derive(Debug)]
pub struct Standard {
    pub name: &'static str,
    pub parameters: u8,
    pub qubits: u8,
    pub home: Home,
    pub moves: &'static [Move],
}

/// Where a gate is at hand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Home {
    /// Built into version 2 or 3.
    BuiltIn(u32),
    /// `stdgates.inc` only.
    Three,
    /// `qelib1.inc` only.
    Two,
    /// Both libraries.
    Both,
}

impl Standard {
    /// Whether the gate is there, given the version and the libraries that were included.
    pub fn at_hand(&self, version: u32, three: bool, two: bool) -> bool {
        match self.home {
            Home::BuiltIn(own) => own == version,
            Home::Three => three,
            Home::Two => two,
            Home::Both => three || two,
        }
    }
}

/// The angle of a move.
pub fn weighted(weights: &[f64; 5], parameters: &[f64]) -> f64 {
    parameters.iter().zip(weights).map(|(value, weight)| value * weight).sum::<f64>() + weights[4]
}

/// Whether a move is a rotation with these parameters: a gate of one angle, such as rz(0), is kept as written; parts of
/// others that vanish are none.
pub fn rotates(weights: &[f64; 5], parameters: &[f64]) -> bool {
    weighted(weights, parameters) != 0.0 || (parameters.len() == 1 && weights == &[0.5, 0.0, 0.0, 0.0, 0.0])
}

const X0: (u8, u8) = (1, 0);
const Z0: (u8, u8) = (0, 1);
const Y0: (u8, u8) = (1, 1);
const X1: (u8, u8) = (2, 0);
const Y1: (u8, u8) = (2, 2);
const Z1: (u8, u8) = (0, 2);
const Z2: (u8, u8) = (0, 4);
const X2: (u8, u8) = (4, 0);

/// The product of strings on different qubits.
const fn and(a: (u8, u8), b: (u8, u8)) -> (u8, u8) {
    (a.0 | b.0, a.1 | b.1)
}

const fn turn((x, z): (u8, u8), turns: u8) -> Move {
    Quarter(x, z, turns)
}

/// exp(-i θ P) with θ = weight · parameter `which`.
const fn by((x, z): (u8, u8), which: usize, weight: f64) -> Move {
    let mut weights = [0.0; 5];
    weights[which] = weight;
    Angle(x, z, weights)
}

/// The constant is the fifth weight.
const ONE: usize = 4;
const EIGHTH: f64 = std::f64::consts::FRAC_PI_8;

const fn gate(name: &'static str, parameters: u8, qubits: u8, home: Home, moves: &'static [Move]) -> Standard {
    Standard { name, parameters, qubits, home, moves }
}

const PHASE: &[Move] = &[by(Z0, 0, 0.5), Phase([0.5, 0.0, 0.0, 0.0, 0.0])];
const CX: &[Move] = &[turn(Z0, 1), turn(X1, 1), turn(and(Z0, X1), 7), Eighths(1)];
const CPHASE: &[Move] =
    &[by(Z0, 0, 0.25), by(Z1, 0, 0.25), by(and(Z0, Z1), 0, -0.25), Phase([0.25, 0.0, 0.0, 0.0, 0.0])];
const ID: &[Move] = &[];
/// rz(φ) ry(π/2) rz(λ)
const U2: &[Move] = &[by(Z0, 1, 0.5), turn(Y0, 1), by(Z0, 0, 0.5)];
/// rz(φ) ry(θ) rz(λ)
const U3: [Move; 3] = [by(Z0, 2, 0.5), by(Y0, 0, 0.5), by(Z0, 1, 0.5)];
const CONTROLLED_U3: [Move; 6] = [
    by(Z1, 2, 0.25),
    by(and(Z0, Z1), 2, -0.25),
    by(Y1, 0, 0.25),
    by(and(Z0, Y1), 0, -0.25),
    by(Z1, 1, 0.25),
    by(and(Z0, Z1), 1, -0.25),
];

/// All of them.
pub const GATES: &[Standard] = &[
    gate("U", 3, 1, Home::BuiltIn(3), &[U3[0], U3[1], U3[2], Phase([0.5, 0.5, 0.5, 0.0, 0.0])]),
    gate("U", 3, 1, Home::BuiltIn(2), &U3),
    gate("CX", 0, 2, Home::BuiltIn(2), CX),
    gate("CX", 0, 2, Home::Three, CX),
    gate("id", 0, 1, Home::Both, ID),
    gate("x", 0, 1, Home::Both, &[turn(X0, 2), Eighths(2)]),
    gate("y", 0, 1, Home::Both, &[turn(Y0, 2), Eighths(2)]),
    gate("z", 0, 1, Home::Both, &[turn(Z0, 2), Eighths(2)]),
    gate("h", 0, 1, Home::Both, &[turn(Z0, 1), turn(X0, 1), turn(Z0, 1), Eighths(2)]),
    gate("s", 0, 1, Home::Both, &[turn(Z0, 1), Eighths(1)]),
    gate("sdg", 0, 1, Home::Both, &[turn(Z0, 7), Eighths(7)]),
    gate("sx", 0, 1, Home::Three, &[turn(X0, 1), Eighths(1)]),
    gate("t", 0, 1, Home::Both, &[by(Z0, ONE, EIGHTH), Phase([0.0, 0.0, 0.0, 0.0, EIGHTH])]),
    gate("tdg", 0, 1, Home::Both, &[by(Z0, ONE, -EIGHTH), Phase([0.0, 0.0, 0.0, 0.0, -EIGHTH])]),
    gate("rx", 1, 1, Home::Both, &[by(X0, 0, 0.5)]),
    gate("ry", 1, 1, Home::Both, &[by(Y0, 0, 0.5)]),
    gate("rz", 1, 1, Home::Both, &[by(Z0, 0, 0.5)]),
    gate("p", 1, 1, Home::Three, PHASE),
    gate("phase", 1, 1, Home::Three, PHASE),
    gate("u1", 1, 1, Home::Both, PHASE),
    gate("u2", 2, 1, Home::Both, U2),
    gate("u3", 3, 1, Home::Both, &U3),
    gate("cx", 0, 2, Home::Both, CX),
    gate("cy", 0, 2, Home::Both, &[turn(Z0, 1), turn(Y1, 1), turn(and(Z0, Y1), 7), Eighths(1)]),
    gate("cz", 0, 2, Home::Both, &[turn(Z0, 1), turn(Z1, 1), turn(and(Z0, Z1), 7), Eighths(1)]),
    gate(
        "ch",
        0,
        2,
        Home::Both,
        &[by(Y1, ONE, -EIGHTH), turn(Z0, 1), turn(Z1, 1), turn(and(Z0, Z1), 7), Eighths(1), by(Y1, ONE, EIGHTH)],
    ),
    gate("swap", 0, 2, Home::Three, &[Swap(0, 1)]),
    gate("cp", 1, 2, Home::Three, CPHASE),
    gate("cphase", 1, 2, Home::Three, CPHASE),
    gate("cu1", 1, 2, Home::Two, CPHASE),
    gate("crx", 1, 2, Home::Three, &[by(X1, 0, 0.25), by(and(Z0, X1), 0, -0.25)]),
    gate("cry", 1, 2, Home::Three, &[by(Y1, 0, 0.25), by(and(Z0, Y1), 0, -0.25)]),
    gate("crz", 1, 2, Home::Both, &[by(Z1, 0, 0.25), by(and(Z0, Z1), 0, -0.25)]),
    gate("cu3", 3, 2, Home::Two, &CONTROLLED_U3),
    gate(
        "cu",
        4,
        2,
        Home::Three,
        // On the control the phase γ + (φ + λ)/2: e^{i(γ - θ/2)} with the e^{i(θ + φ + λ)/2} that U has over rz ry rz.
        &[
            CONTROLLED_U3[0],
            CONTROLLED_U3[1],
            CONTROLLED_U3[2],
            CONTROLLED_U3[3],
            CONTROLLED_U3[4],
            CONTROLLED_U3[5],
            Angle(0, 1, [0.0, 0.25, 0.25, 0.5, 0.0]),
            Phase([0.0, 0.25, 0.25, 0.5, 0.0]),
        ],
    ),
    gate(
        "ccx",
        0,
        3,
        Home::Both,
        &[
            by(Z0, ONE, EIGHTH),
            by(Z1, ONE, EIGHTH),
            by(X2, ONE, EIGHTH),
            by(and(Z0, Z1), ONE, -EIGHTH),
            by(and(Z0, X2), ONE, -EIGHTH),
            by(and(Z1, X2), ONE, -EIGHTH),
            by(and(and(Z0, Z1), X2), ONE, EIGHTH),
            Phase([0.0, 0.0, 0.0, 0.0, EIGHTH]),
        ],
    ),
    gate(
        "cswap",
        0,
        3,
        Home::Three,
        &[
            by(and(X1, X2), ONE, EIGHTH),
            by(and(Z0, and(X1, X2)), ONE, -EIGHTH),
            by(and(Y1, (4, 4)), ONE, EIGHTH),
            by(and(Z0, and(Y1, (4, 4))), ONE, -EIGHTH),
            by(and(Z1, Z2), ONE, EIGHTH),
            by(and(Z0, and(Z1, Z2)), ONE, -EIGHTH),
            by(Z0, ONE, EIGHTH),
            Phase([0.0, 0.0, 0.0, 0.0, EIGHTH]),
        ],
    ),
];
