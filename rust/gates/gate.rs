//! The gates that a circuit is written in: all of them in the standard library of OpenQASM 3, or defined from it.
//!
//! Rotations are never used as Clifford gates, so that a reader need not guess which rx(π/2) is meant as which.

/// A gate on physical qubits; angles as OpenQASM takes them, twice the θ of exp(-i θ P).
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Gate {
    /// Hadamard.
    H(u16),
    /// diag(1, i).
    S(u16),
    /// diag(1, -i).
    Sdg(u16),
    /// exp(-i angle X/2).
    Rx(u16, f64),
    /// exp(-i angle Y/2).
    Ry(u16, f64),
    /// exp(-i angle Z/2).
    Rz(u16, f64),
    /// Controlled X: control, target.
    Cx(u16, u16),
    /// Controlled Z.
    Cz(u16, u16),
    /// Exchange of two qubits.
    Swap(u16, u16),
    /// exp(-i angle Z Z / 2).
    Zz(u16, u16, f64),
}

/// What a gate looks like on one of its qubits: gates that look alike there commute there.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Axis {
    /// A function of Z.
    Z,
    /// A function of X.
    X,
    /// Neither.
    Mixed,
}

impl Gate {
    /// The first qubit, and the second where there is one.
    pub fn qubits(self) -> (u16, Option<u16>) {
        match self {
            Self::H(q) | Self::S(q) | Self::Sdg(q) => (q, None),
            Self::Rx(q, _) | Self::Ry(q, _) | Self::Rz(q, _) => (q, None),
            Self::Cx(a, b) | Self::Cz(a, b) | Self::Swap(a, b) | Self::Zz(a, b, _) => (a, Some(b)),
        }
    }

    /// The gate that undoes this one; None for rotations, which are kept as they are.
    pub fn inverse(self) -> Option<Self> {
        match self {
            Self::H(_) | Self::Cx(..) | Self::Cz(..) | Self::Swap(..) => Some(self),
            Self::S(q) => Some(Self::Sdg(q)),
            Self::Sdg(q) => Some(Self::S(q)),
            Self::Rx(..) | Self::Ry(..) | Self::Rz(..) | Self::Zz(..) => None,
        }
    }

    /// Whether one gate undoes the other.
    pub fn undoes(self, other: Self) -> bool {
        match (self, other) {
            (Self::Cz(a, b), Self::Cz(c, d)) | (Self::Swap(a, b), Self::Swap(c, d)) => {
                (a, b) == (c, d) || (a, b) == (d, c)
            }
            _ => self.inverse() == Some(other),
        }
    }

    /// How the gate looks on one of its qubits.
    pub fn axis(self, qubit: u16) -> Axis {
        match self {
            Self::S(_) | Self::Sdg(_) | Self::Rz(..) | Self::Cz(..) | Self::Zz(..) => Axis::Z,
            Self::Rx(..) => Axis::X,
            Self::Cx(control, _) => {
                if qubit == control {
                    Axis::Z
                } else {
                    Axis::X
                }
            }
            Self::H(_) | Self::Ry(..) | Self::Swap(..) => Axis::Mixed,
        }
    }

    /// The angle of a rotation.
    pub fn angle(self) -> Option<f64> {
        match self {
            Self::Rx(_, angle) | Self::Ry(_, angle) | Self::Rz(_, angle) | Self::Zz(_, _, angle) => Some(angle),
            _ => None,
        }
    }
}

/// A gate, or a body that runs several times.
#[derive(Clone, Debug, PartialEq)]
pub enum Item<G = Gate> {
    /// One gate.
    Gate(G),
    /// A repeated body.
    Loop(Box<Loop<G>>),
}

/// Items that run `repeat` times over.
#[derive(Clone, Debug, PartialEq)]
pub struct Loop<G = Gate> {
    /// How often, at least twice.
    pub repeat: u64,
    /// What runs, first in time first.
    pub items: Vec<Item<G>>,
    /// The qubits that the body touches, ascending.
    pub qubits: Vec<u16>,
}

impl Item {
    /// Calls `visit` for each qubit that the item touches.
    pub fn each_qubit(&self, mut visit: impl FnMut(u16)) {
        match self {
            Self::Gate(gate) => {
                let (first, second) = gate.qubits();
                visit(first);
                if let Some(second) = second {
                    visit(second);
                }
            }
            Self::Loop(body) => body.qubits.iter().copied().for_each(visit),
        }
    }
}
