//! The syntax tree of one statement. A file is never held as a whole: statements are carried out as they are read.

use std::rc::Rc;

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
    Gate(Rc<Definition<'a>>),
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
    Remark(Place),
    End,
}

impl Expression<'_> {
    /// Whether the value depends on a name.
    pub fn mentions(&self, name: &str) -> bool {
        match self {
            Self::Integer(_) | Self::Real(_) | Self::Truth(_) => false,
            Self::Name(own, _) => *own == name,
            Self::Unary(_, inner, _) => inner.mentions(name),
            Self::Binary(_, both, _) => both.iter().any(|inner| inner.mentions(name)),
            Self::Call(_, inner, _) => inner.iter().any(|inner| inner.mentions(name)),
        }
    }
}

impl Span<'_> {
    fn mentions(&self, name: &str) -> bool {
        [&self.start, &self.step, &self.stop].into_iter().flatten().any(|inner| inner.mentions(name))
    }
}

impl Operand<'_> {
    fn mentions(&self, name: &str) -> bool {
        match &self.index {
            None => false,
            Some(Index::One(one)) => one.mentions(name),
            Some(Index::Span(span)) => span.mentions(name),
            Some(Index::Set(set)) => set.iter().any(|inner| inner.mentions(name)),
        }
    }
}

impl Statement<'_> {
    /// Whether what the statement does depends on a name; a name hidden by another of the same spelling counts too.
    pub fn mentions(&self, name: &str) -> bool {
        let any = |operands: &[Operand]| operands.iter().any(|operand| operand.mentions(name));
        match self {
            Self::Call(call) => {
                let modified = call.modifiers.iter().any(|modifier| match modifier {
                    Modifier::Inverse => false,
                    Modifier::Power(value) => value.mentions(name),
                    Modifier::Controls(count, ..) => count.as_ref().is_some_and(|count| count.mentions(name)),
                });
                modified || call.arguments.iter().any(|argument| argument.mentions(name)) || any(&call.operands)
            }
            Self::Constant { value, .. } => value.mentions(name),
            Self::Alias { parts, .. } => any(parts),
            Self::Barrier(operands) | Self::Delay(operands, _) => any(operands),
            Self::For { range, body, .. } => {
                let ranged = match range {
                    Range::Span(span) => span.mentions(name),
                    Range::Set(set) => set.iter().any(|value| value.mentions(name)),
                };
                ranged || body.iter().any(|statement| statement.mentions(name))
            }
            Self::Measure { .. } | Self::Qubits { .. } | Self::Bits { .. } | Self::Gate(_) | Self::Include(..) => false,
            Self::Remark(_) | Self::End => false,
        }
    }
}
