//! The cursor over tokens, and the grammar of expressions and operands.
//!
//! Expressions climb by precedence; the two versions differ in it: in version 2 `^` is the power, in version 3 `**` is, and
//! `^` is an exclusive or that stands below the sums.

use super::lexer::{Kind, Lexer, Token, clip};
use super::refusal::{Place, Refusal};
use super::syntax::{Expression, Index, Operand, Span};

/// Brackets, signs and blocks inside each other.
const DEEPEST: u32 = 100;
const LONGEST: u32 = 1000;

/// Words that version 3 keeps for itself, beside types.
const RESERVED: [&str; 47] = [
    "OPENQASM",
    "include",
    "defcalgrammar",
    "def",
    "cal",
    "defcal",
    "gate",
    "extern",
    "box",
    "let",
    "break",
    "continue",
    "if",
    "else",
    "end",
    "return",
    "for",
    "while",
    "in",
    "switch",
    "case",
    "default",
    "nop",
    "pragma",
    "input",
    "output",
    "const",
    "readonly",
    "mutable",
    "qreg",
    "qubit",
    "creg",
    "array",
    "void",
    "gphase",
    "inv",
    "pow",
    "ctrl",
    "negctrl",
    "durationof",
    "delay",
    "reset",
    "measure",
    "barrier",
    "true",
    "false",
    "im",
];

pub struct Parser<'a> {
    pub lexer: Lexer<'a>,
    pub token: Token<'a>,
    /// Where the token before ended, for what is missing after it.
    pub last: Place,
    pub version: u32,
    depth: u32,
    /// Binary operations in the statement at hand.
    pub operations: u32,
}

type Outcome<T> = Result<T, Refusal>;

impl<'a> Parser<'a> {
    pub fn new(source: u32, text: &'a str, version: u32) -> Outcome<Self> {
        let mut lexer = Lexer::new(source, text);
        let token = lexer.next()?;
        Ok(Self { lexer, token, last: token.place, version, depth: 0, operations: 0 })
    }

    /// Takes the token and reads the one after it.
    pub fn take(&mut self) -> Outcome<Token<'a>> {
        let token = self.token;
        let length = token.text.len() + if token.kind == Kind::Text { 2 } else { 0 };
        self.last = Place { offset: token.place.offset + length, at: token.place.at + length, ..token.place };
        self.token = self.lexer.next()?;
        Ok(token)
    }

    pub fn is(&self, text: &str) -> bool {
        self.token.text == text && matches!(self.token.kind, Kind::Sign | Kind::Name)
    }

    /// Takes the token if it is this one.
    pub fn took(&mut self, text: &str) -> Outcome<bool> {
        let found = self.is(text);
        if found {
            self.take()?;
        }
        Ok(found)
    }

    /// Takes this token or refuses.
    pub fn expect(&mut self, text: &str, after: &str) -> Outcome<()> {
        if self.took(text)? {
            return Ok(());
        }
        let message = format!("expected '{text}' after {after} ({}); add it", self.found());
        // What is missing belongs where the text before it ended.
        Err(self.last.refuse(message))
    }

    pub fn found(&self) -> String {
        match self.token.kind {
            Kind::End => "found the end of the text".into(),
            _ => format!("found '{}'", clip(self.token.text)),
        }
    }

    pub fn unexpected(&self, wanted: &str) -> Refusal {
        self.token.place.refuse(format!("expected {wanted} ({})", self.found()))
    }

    pub fn name(&mut self, what: &str) -> Outcome<Token<'a>> {
        if self.token.kind != Kind::Name {
            return Err(self.unexpected(what));
        }
        let token = self.take()?;
        if self.version == 2 && !token.text.starts_with(|c: char| c.is_ascii_lowercase()) {
            return Err(token.place.refuse(format!(
                "no identifier of version 2, which start with a lower-case letter ({}); rename it",
                token.text
            )));
        }
        if self.version == 3 && (RESERVED.contains(&token.text) || is_type(token.text)) && what.starts_with("a name") {
            let message = format!("a word of the language cannot be a name ({}); choose another", token.text);
            return Err(token.place.refuse(message));
        }
        Ok(token)
    }

    pub fn deeper<T>(&mut self, inner: impl FnOnce(&mut Self) -> Outcome<T>) -> Outcome<T> {
        if self.depth >= DEEPEST {
            let message = format!("nested deeper than {DEEPEST} levels; write it flatter");
            return Err(self.token.place.refuse(message));
        }
        self.depth += 1;
        let outcome = inner(self);
        self.depth -= 1;
        outcome
    }

    /// Items with commas between them up to a closing sign, which is taken; version 3 allows a comma after the last.
    pub fn list<T>(&mut self, close: &str, mut item: impl FnMut(&mut Self) -> Outcome<T>) -> Outcome<Vec<T>> {
        let mut items = Vec::new();
        while !self.is(close) {
            items.push(item(self)?);
            if !self.took(",")? {
                break;
            }
            if self.version == 2 && self.is(close) {
                return Err(self.unexpected("another entry after ','"));
            }
        }
        self.expect(close, "the list")?;
        Ok(items)
    }

    /// How tightly a binary operator holds, and whether it groups from the right.
    fn strength(&self) -> Option<(u32, bool)> {
        if self.token.kind != Kind::Sign {
            return None;
        }
        Some(match (self.token.text, self.version) {
            ("^", 2) => (12, true),
            ("**", 3) => (12, true),
            ("*" | "/", _) | ("%", 3) => (10, false),
            ("+" | "-", _) => (9, false),
            ("<<" | ">>", 3) => (8, false),
            ("<" | ">" | "<=" | ">=", 3) => (7, false),
            ("==" | "!=", 3) => (6, false),
            ("&", 3) => (5, false),
            ("^", 3) => (4, false),
            ("|", 3) => (3, false),
            ("&&", 3) => (2, false),
            ("||", 3) => (1, false),
            _ => return None,
        })
    }

    pub fn expression(&mut self) -> Outcome<Expression<'a>> {
        self.deeper(|parser| parser.climb(0))
    }

    fn climb(&mut self, least: u32) -> Outcome<Expression<'a>> {
        let mut left = self.unary()?;
        while let Some((strength, from_right)) = self.strength().filter(|&(strength, _)| strength >= least) {
            // A long sum makes a deep tree, and the tree is walked by recursion.
            self.operations += 1;
            if self.operations > LONGEST {
                let message = format!("more than {LONGEST} operations in one statement; name some of them by const");
                return Err(self.token.place.refuse(message));
            }
            let sign = self.take()?;
            let right = self.deeper(|parser| parser.climb(if from_right { strength } else { strength + 1 }))?;
            left = Expression::Binary(sign.text, Box::new([left, right]), sign.place);
        }
        Ok(left)
    }

    fn unary(&mut self) -> Outcome<Expression<'a>> {
        if self.token.kind == Kind::Sign && (self.is("-") || self.version == 3 && (self.is("!") || self.is("~"))) {
            let sign = self.take()?;
            // The power holds tighter than the sign: -2**2 is -4.
            let inner = self.deeper(|parser| parser.climb(11))?;
            return Ok(Expression::Unary(sign.text, Box::new(inner), sign.place));
        }
        if self.is("+") {
            let message = "no unary plus in the language ('+' where a value should stand); leave it out";
            return Err(self.token.place.refuse(message));
        }
        self.atom()
    }

    fn atom(&mut self) -> Outcome<Expression<'a>> {
        match self.token.kind {
            Kind::Integer(value) => {
                self.take()?;
                Ok(Expression::Integer(value))
            }
            Kind::Real(value) => {
                self.take()?;
                Ok(Expression::Real(value))
            }
            Kind::Name => {
                let name = self.take()?;
                match name.text {
                    "true" => return Ok(Expression::Truth(true)),
                    "false" => return Ok(Expression::Truth(false)),
                    _ => {}
                }
                let size = if self.is("[") && is_type(name.text) { self.type_size()? } else { false };
                if self.took("(")? {
                    let arguments = self.list(")", Self::expression)?;
                    return Ok(Expression::Call(name.text, arguments, name.place));
                }
                if size {
                    return Err(self.unexpected("'(' after a type"));
                }
                if self.version == 3 && self.took("[")? {
                    self.index()?;
                    return Ok(Expression::Entry(name.text, name.place));
                }
                Ok(Expression::Name(name.text, name.place))
            }
            Kind::Sign if self.is("(") => {
                self.take()?;
                let inner = self.expression()?;
                self.expect(")", "an expression in brackets")?;
                Ok(inner)
            }
            _ => Err(self.unexpected("a number, a name or '('")),
        }
    }

    /// The `[32]` of `int[32]`; the size does not matter to what is calculated here.
    pub fn type_size(&mut self) -> Outcome<bool> {
        if !self.took("[")? {
            return Ok(false);
        }
        self.expression()?;
        self.expect("]", "the size of a type")?;
        Ok(true)
    }

    /// `name`, `name[index]`, `$3`.
    pub fn operand(&mut self) -> Outcome<Operand<'a>> {
        if let Kind::Machine(number) = self.token.kind {
            let token = self.take()?;
            return Ok(Operand { name: token.text, machine: Some(number), index: None, place: token.place });
        }
        if self.token.kind != Kind::Name {
            return Err(self.unexpected("a qubit or a register"));
        }
        let name = self.take()?;
        let index = if self.took("[")? { Some(self.index()?) } else { None };
        Ok(Operand { name: name.text, machine: None, index, place: name.place })
    }

    fn index(&mut self) -> Outcome<Index<'a>> {
        if self.took("{")? {
            let set = self.list("}", Self::expression)?;
            self.expect("]", "the index")?;
            return Ok(Index::Set(set));
        }
        let place = self.token.place;
        let start = if self.is(":") { None } else { Some(self.expression()?) };
        if self.is(":") {
            let span = self.span(start, place)?;
            return Ok(Index::Span(span));
        }
        self.expect("]", "the index")?;
        // There is an expression wherever there was no colon.
        start.map(Index::One).ok_or_else(|| place.refuse("expected an index"))
    }

    /// The rest of `start:step:stop]` from the first colon on.
    pub fn span(&mut self, start: Option<Expression<'a>>, place: Place) -> Outcome<Span<'a>> {
        self.expect(":", "the start of a range")?;
        let open = |parser: &Self| parser.is(":") || parser.is("]");
        let mut stop = if open(self) { None } else { Some(self.expression()?) };
        let mut step = None;
        if self.took(":")? {
            step = stop.take();
            stop = if open(self) { None } else { Some(self.expression()?) };
        }
        self.expect("]", "a range")?;
        Ok(Span { start, step, stop, place })
    }
}

pub fn is_type(name: &str) -> bool {
    matches!(name, "int" | "uint" | "float" | "angle" | "bool" | "bit" | "complex" | "duration" | "stretch")
}
