//! The syntax tree of one statement. A file is never held as a whole: statements are carried out as they are read.

use super::refusal::Place;

/// Something to calculate.
#[derive(Debug)]
pub enum Expression<'a> {
    Integer(i64),
    Real(f64),
    Truth(bool),
    Name(&'a str, Place),
    Unary(&'a str, Box<Expression<'a>>, Place),
    Binary(&'a str, Box<[Expression<'a>; 2]>, Place),
    Call(&'a str, Vec<Expression<'a>>, Place),
    /// An entry of a register of bits, which has no value before the circuit runs.
    Entry(&'a str, Place),
}

/// `start:step:stop`, each of which may be left out.
#[derive(Debug)]
pub struct Span<'a> {
    pub start: Option<Expression<'a>>,
    pub step: Option<Expression<'a>>,
    pub stop: Option<Expression<'a>>,
    pub place: Place,
}

/// Which entries of a register.
#[derive(Debug)]
pub enum Index<'a> {
    One(Expression<'a>),
    Span(Span<'a>),
    Set(Vec<Expression<'a>>),
}

/// A register, or entries of it.
#[derive(Debug)]
pub struct Operand<'a> {
    /// The name, or the text `$3` of a qubit of the machine.
    pub name: &'a str,
    pub machine: Option<u32>,
    pub index: Option<Index<'a>>,
    pub place: Place,
}

/// What stands before `@`.
#[derive(Debug)]
pub enum Modifier<'a> {
    Inverse,
    Power(Expression<'a>),
    Controls(Option<Expression<'a>>, bool, Place),
}

/// One gate with everything that it is applied to.
#[derive(Debug)]
pub struct Call<'a> {
    pub modifiers: Vec<Modifier<'a>>,
    pub name: &'a str,
    pub arguments: Vec<Expression<'a>>,
    pub operands: Vec<Operand<'a>>,
    pub place: Place,
}

/// `gate name(parameters) qubits { body }`.
#[derive(Debug)]
pub struct Definition<'a> {
    pub name: &'a str,
    pub parameters: Vec<&'a str>,
    pub qubits: Vec<&'a str>,
    pub body: Vec<Statement<'a>>,
    pub place: Place,
}

/// What a loop runs through.
#[derive(Debug)]
pub enum Range<'a> {
    Span(Span<'a>),
    Set(Vec<Expression<'a>>),
}

/// One statement.
#[derive(Debug)]
pub enum Statement<'a> {
    Include(&'a str, Place),
    Qubits {
        name: &'a str,
        size: Option<Expression<'a>>,
        place: Place,
    },
    Bits {
        name: &'a str,
        size: Option<Expression<'a>>,
        place: Place,
    },
    Constant {
        kind: &'a str,
        name: &'a str,
        value: Expression<'a>,
        place: Place,
    },
    Alias {
        name: &'a str,
        parts: Vec<Operand<'a>>,
        place: Place,
    },
    Gate(Box<Definition<'a>>),
    Call(Call<'a>),
    Barrier(Vec<Operand<'a>>),
    Delay(Vec<Operand<'a>>, Place),
    /// `declares` where the target is a new register of bits: `bit c = measure q;`.
    Measure {
        qubits: Operand<'a>,
        target: Option<Box<Operand<'a>>>,
        declares: bool,
        place: Place,
    },
    For {
        variable: &'a str,
        range: Range<'a>,
        body: Vec<Statement<'a>>,
        place: Place,
    },
    /// The bodies of `if` and `else`.
    If {
        condition: Expression<'a>,
        bodies: [Vec<Statement<'a>>; 2],
        place: Place,
    },
    Remark(Place),
    End,
}

impl Expression<'_> {
    /// Whether the value depends on a name.
    pub fn mentions(&self, name: &str) -> bool {
        match self {
            Self::Integer(_) | Self::Real(_) | Self::Truth(_) => false,
            Self::Name(own, _) | Self::Entry(own, _) => *own == name,
            Self::Unary(_, inner, _) => inner.mentions(name),
            Self::Binary(_, both, _) => both.iter().any(|inner| inner.mentions(name)),
            Self::Call(_, inner, _) => inner.iter().any(|inner| inner.mentions(name)),
        }
    }

    /// The first name, or register of an entry, that `wanted` picks.
    pub fn find_name(&self, wanted: &dyn Fn(&Self) -> bool) -> Option<&Self> {
        match self {
            _ if wanted(self) => Some(self),
            Self::Unary(_, inner, _) => inner.find_name(wanted),
            Self::Binary(_, both, _) => both.iter().find_map(|inner| inner.find_name(wanted)),
            Self::Call(_, inner, _) => inner.iter().find_map(|inner| inner.find_name(wanted)),
            _ => None,
        }
    }
}

impl<'a> Span<'a> {
    pub fn expressions(&self) -> impl Iterator<Item = &Expression<'a>> {
        [&self.start, &self.step, &self.stop].into_iter().flatten()
    }
}

impl<'a> Range<'a> {
    /// What the values are calculated from.
    pub fn expressions(&self) -> Vec<&Expression<'a>> {
        match self {
            Self::Span(span) => span.expressions().collect(),
            Self::Set(set) => set.iter().collect(),
        }
    }
}

impl<'a> Call<'a> {
    /// What the modifiers and the angles are calculated from.
    pub fn expressions(&self) -> impl Iterator<Item = &Expression<'a>> {
        let modified = self.modifiers.iter().filter_map(|modifier| match modifier {
            Modifier::Inverse => None,
            Modifier::Power(value) => Some(value),
            Modifier::Controls(count, ..) => count.as_ref(),
        });
        modified.chain(&self.arguments)
    }
}

impl Operand<'_> {
    fn mentions(&self, name: &str) -> bool {
        match &self.index {
            None => false,
            Some(Index::One(one)) => one.mentions(name),
            Some(Index::Span(span)) => span.expressions().any(|inner| inner.mentions(name)),
            Some(Index::Set(set)) => set.iter().any(|inner| inner.mentions(name)),
        }
    }
}

impl Statement<'_> {
    /// Whether what the statement does depends on a name; a name hidden by another of the same spelling counts too.
    pub fn mentions(&self, name: &str) -> bool {
        let any = |operands: &[Operand]| operands.iter().any(|operand| operand.mentions(name));
        match self {
            Self::Call(call) => call.expressions().any(|value| value.mentions(name)) || any(&call.operands),
            Self::Constant { value, .. } => value.mentions(name),
            Self::Alias { parts, .. } => any(parts),
            Self::Barrier(operands) | Self::Delay(operands, _) => any(operands),
            Self::For { range, body, .. } => {
                let ranged = range.expressions().iter().any(|value| value.mentions(name));
                ranged || body.iter().any(|statement| statement.mentions(name))
            }
            Self::If { condition, bodies, .. } => {
                condition.mentions(name) || bodies.iter().flatten().any(|statement| statement.mentions(name))
            }
            Self::Measure { .. } | Self::Qubits { .. } | Self::Bits { .. } | Self::Gate(_) | Self::Include(..) => false,
            Self::Remark(_) | Self::End => false,
        }
    }
}
