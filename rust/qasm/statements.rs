//! The grammar of statements, both versions.

use super::lexer::Kind;
use super::parser::{Parser, is_type};
use super::refusal::{Place, Refusal};
use super::syntax::{Call, Definition, Expression, Modifier, Operand, Range, Statement};

type Outcome<T> = Result<T, Refusal>;

/// Words that the standard gives a meaning and that make no unitary circuit, or need values that come later.
const UNSUPPORTED: [(&str, &str); 24] = [
    ("if", "a branch"),
    ("else", "a branch"),
    ("while", "a loop whose end is not known"),
    ("switch", "a branch"),
    ("break", "a jump"),
    ("continue", "a jump"),
    ("return", "a jump"),
    ("end", "a jump"),
    ("def", "a subroutine"),
    ("extern", "an outside function"),
    ("opaque", "a gate without a definition"),
    ("cal", "a pulse"),
    ("defcal", "a pulse"),
    ("defcalgrammar", "a pulse"),
    ("reset", "an operation that is not unitary"),
    ("input", "a value that is given later"),
    ("output", "a value that is given back"),
    ("array", "a variable"),
    ("int", "a variable"),
    ("uint", "a variable"),
    ("float", "a variable"),
    ("angle", "a variable"),
    ("bool", "a variable"),
    ("box", "a box of timing"),
];

impl<'a> Parser<'a> {
    /// Reads the next statement; [`Statement::End`] after the last.
    pub fn statement(&mut self) -> Outcome<Statement<'a>> {
        let start = self.token;
        self.operations = 0;
        match start.kind {
            Kind::End => return Ok(Statement::End),
            Kind::Remark => {
                self.take()?;
                if start.text.starts_with('@') && (self.token.kind == Kind::End || self.is("}")) {
                    return Err(self.unexpected("a statement after an annotation"));
                }
                return Ok(Statement::Remark(start.place));
            }
            Kind::Name => {}
            _ => return Err(self.unexpected("a statement")),
        }
        match (start.text, self.version) {
            ("OPENQASM", _) => {
                Err(start.place.refuse("OPENQASM stands before everything else; move this line to the top"))
            }
            ("include", _) => self.include(),
            ("qreg" | "creg", _) | ("qubit" | "bit", 3) => self.register(),
            ("const", 3) => self.constant(),
            ("let", 3) => self.alias(),
            ("gate", _) => self.definition(),
            ("barrier", _) => {
                self.take()?;
                let operands = if self.is(";") { vec![] } else { self.operands()? };
                self.end("the barrier")?;
                Ok(Statement::Barrier(operands))
            }
            ("delay", 3) => self.delay(),
            ("measure", _) => self.measure(None, false),
            ("for", 3) => self.repeat(),
            ("if", 3) => self.branch(),
            (word, _) => {
                if let Some((_, what)) = UNSUPPORTED.iter().find(|(name, _)| *name == word) {
                    return Err(unsupported(start.place, word, what));
                }
                self.call_or_assignment()
            }
        }
    }

    fn end(&mut self, after: &str) -> Outcome<()> {
        self.expect(";", after)
    }

    fn operands(&mut self) -> Outcome<Vec<Operand<'a>>> {
        let mut operands = vec![self.operand()?];
        while self.took(",")? {
            if self.version == 3 && self.is(";") {
                break;
            }
            operands.push(self.operand()?);
        }
        Ok(operands)
    }

    fn include(&mut self) -> Outcome<Statement<'a>> {
        self.take()?;
        if self.token.kind != Kind::Text {
            return Err(self.unexpected("a file name in quotes after include"));
        }
        let name = self.take()?;
        self.end("include")?;
        Ok(Statement::Include(name.text, name.place))
    }

    /// `qubit[3] q;`, `qreg q[3];` and the same for bits.
    fn register(&mut self) -> Outcome<Statement<'a>> {
        let word = self.take()?;
        let modern = matches!(word.text, "qubit" | "bit");
        let mut size = None;
        if modern && self.took("[")? {
            size = Some(self.expression()?);
            self.expect("]", "the size")?;
        }
        let name = self.name("a name for the register")?;
        if !modern && self.took("[")? {
            size = Some(self.expression()?);
            self.expect("]", "the size")?;
        } else if self.version == 2 {
            return Err(self.unexpected("the size of the register in brackets"));
        }
        if word.text == "bit" && self.took("=")? {
            // bit c = measure q;
            if !self.is("measure") {
                return Err(unsupported(self.token.place, "bit", "a variable"));
            }
            let target = Operand { name: name.text, machine: None, index: None, place: name.place };
            return self.measure(Some(target), true);
        }
        self.end("the declaration")?;
        let (name, place) = (name.text, name.place);
        Ok(match word.text {
            "qubit" | "qreg" => Statement::Qubits { name, size, place },
            _ => Statement::Bits { name, size, place },
        })
    }

    fn constant(&mut self) -> Outcome<Statement<'a>> {
        self.take()?;
        let kind = self.name("a type")?;
        if !is_type(kind.text) || matches!(kind.text, "bit" | "complex" | "duration" | "stretch") {
            return Err(unsupported(kind.place, kind.text, "a constant that is no real number"));
        }
        self.type_size()?;
        let name = self.name("a name")?;
        self.expect("=", "the name of a constant")?;
        let value = self.expression()?;
        self.end("the constant")?;
        Ok(Statement::Constant { kind: kind.text, name: name.text, value, place: name.place })
    }

    fn alias(&mut self) -> Outcome<Statement<'a>> {
        self.take()?;
        let name = self.name("a name")?;
        self.expect("=", "the name of an alias")?;
        let mut parts = vec![self.operand()?];
        while self.took("++")? {
            parts.push(self.operand()?);
        }
        self.end("the alias")?;
        Ok(Statement::Alias { name: name.text, parts, place: name.place })
    }

    fn definition(&mut self) -> Outcome<Statement<'a>> {
        self.take()?;
        let name = self.name("a name for the gate")?;
        let parameter = |parser: &mut Self| Ok(parser.name("a name")?.text);
        let parameters = if self.took("(")? { self.list(")", parameter)? } else { vec![] };
        let mut qubits = vec![parameter(self)?];
        while self.took(",")? {
            if self.is("{") && self.version == 3 {
                break;
            }
            qubits.push(parameter(self)?);
        }
        let body = self.block("the head of the gate")?;
        Ok(Statement::Gate(Box::new(Definition { name: name.text, parameters, qubits, body, place: name.place })))
    }

    fn block(&mut self, after: &str) -> Outcome<Vec<Statement<'a>>> {
        self.expect("{", after)?;
        self.deeper(|parser| {
            let mut body = Vec::new();
            while !parser.is("}") {
                if parser.token.kind == Kind::End {
                    return Err(parser.unexpected("'}'"));
                }
                body.push(parser.inner_statement()?);
            }
            parser.take()?;
            Ok(body)
        })
    }

    /// What a loop or a branch carries out: a block, or one statement with its annotations.
    fn body(&mut self, after: &str, what: &str) -> Outcome<Vec<Statement<'a>>> {
        if self.is("{") {
            return self.block(after);
        }
        self.deeper(|parser| {
            let mut body = Vec::new();
            loop {
                if parser.token.kind == Kind::End || parser.is("}") {
                    return Err(parser.unexpected(what));
                }
                let annotation = parser.token.kind == Kind::Remark && parser.token.text.starts_with('@');
                body.push(parser.inner_statement()?);
                if !annotation {
                    return Ok(body);
                }
            }
        })
    }

    /// A statement of a block, where nothing global is declared.
    fn inner_statement(&mut self) -> Outcome<Statement<'a>> {
        let (place, word) = (self.token.place, self.token.text);
        let statement = self.statement()?;
        match statement {
            Statement::Gate(_) | Statement::Qubits { .. } | Statement::Include(..) => {
                Err(place.refuse(format!("declared inside a block ({word}); move it out")))
            }
            inner => Ok(inner),
        }
    }

    fn delay(&mut self) -> Outcome<Statement<'a>> {
        let word = self.take()?;
        self.expect("[", "delay")?;
        if self.token.kind != Kind::Duration {
            return Err(self.unexpected("a time such as 100ns"));
        }
        self.take()?;
        self.expect("]", "the time")?;
        let operands = if self.is(";") { vec![] } else { self.operands()? };
        self.end("the delay")?;
        Ok(Statement::Delay(operands, word.place))
    }

    /// `measure q -> c;`, or what follows `c =`.
    fn measure(&mut self, mut target: Option<Operand<'a>>, declares: bool) -> Outcome<Statement<'a>> {
        let word = self.take()?;
        let qubits = self.operand()?;
        if target.is_none() && self.took("->")? {
            target = Some(self.operand()?);
        }
        if target.is_none() && self.version == 2 {
            return Err(self.unexpected("'->' and a classical register"));
        }
        self.end("the measurement")?;
        Ok(Statement::Measure { qubits, target: target.map(Box::new), declares, place: word.place })
    }

    fn repeat(&mut self) -> Outcome<Statement<'a>> {
        let word = self.take()?;
        let kind = self.name("a type such as int")?;
        if !matches!(kind.text, "int" | "uint") {
            let message = format!("a loop over something else than whole numbers ({}); write: for int", kind.text);
            return Err(kind.place.refuse(message));
        }
        self.type_size()?;
        let variable = self.name("a name for the loop's variable")?;
        self.expect("in", "the loop's variable")?;
        let range = if self.took("{")? {
            Range::Set(self.list("}", Self::expression)?)
        } else if self.took("[")? {
            let place = self.token.place;
            let start = if self.is(":") { None } else { Some(self.expression()?) };
            Range::Span(self.span(start, place)?)
        } else {
            return Err(self.unexpected("a range such as [0:9] or a set such as {1, 2}"));
        };
        let body = self.body("the loop's range", "the body of the loop")?;
        Ok(Statement::For { variable: variable.text, range, body, place: word.place })
    }

    /// `if (condition) { … } else { … }`.
    fn branch(&mut self) -> Outcome<Statement<'a>> {
        let word = self.take()?;
        self.expect("(", "if")?;
        let condition = self.expression()?;
        self.expect(")", "the condition")?;
        let taken = self.body("the condition", "the body of the branch")?;
        let other = if self.took("else")? { self.body("else", "the body after else")? } else { vec![] };
        Ok(Statement::If { condition, bodies: [taken, other], place: word.place })
    }

    /// A gate with its modifiers, or `c = measure q;`.
    fn call_or_assignment(&mut self) -> Outcome<Statement<'a>> {
        let mut modifiers = Vec::new();
        let place = self.token.place;
        loop {
            let name = self.take()?;
            let modifier = match name.text {
                "inv" if self.version == 3 => Modifier::Inverse,
                "pow" if self.version == 3 => {
                    self.expect("(", "pow")?;
                    let exponent = self.expression()?;
                    self.expect(")", "the exponent")?;
                    Modifier::Power(exponent)
                }
                "ctrl" | "negctrl" if self.version == 3 => {
                    let count = if self.took("(")? {
                        let count = self.expression()?;
                        self.expect(")", "the number of controls")?;
                        Some(count)
                    } else {
                        None
                    };
                    Modifier::Controls(count, name.text == "ctrl", name.place)
                }
                _ => return self.call(modifiers, name.text, place),
            };
            if modifiers.len() >= 64 {
                return Err(name.place.refuse("more than 64 modifiers on one gate; define a gate for some of them"));
            }
            self.expect("@", "a modifier")?;
            if self.token.kind != Kind::Name {
                return Err(self.unexpected("a gate"));
            }
            modifiers.push(modifier);
        }
    }

    fn call(&mut self, modifiers: Vec<Modifier<'a>>, name: &'a str, place: Place) -> Outcome<Statement<'a>> {
        let arguments = if self.took("(")? { self.list(")", Self::expression)? } else { vec![] };
        if name == "gphase" && arguments.is_empty() {
            return Err(self.last.refuse("expected '(' after gphase; write gphase(pi/4)"));
        }
        let plain = modifiers.is_empty() && arguments.is_empty();
        if plain && (self.is("[") || self.is("=")) {
            // The only assignment is that of a measurement.
            let index = if self.took("[")? { Some(self.one_index()?) } else { None };
            self.expect("=", "a name that is no gate")?;
            if !self.is("measure") {
                return Err(unsupported(place, name, "an assignment"));
            }
            let index = index.map(super::syntax::Index::One);
            return self.measure(Some(Operand { name, machine: None, index, place }), false);
        }
        if plain && self.token.kind == Kind::Sign && self.token.text.ends_with('=') {
            return Err(unsupported(place, name, "an assignment"));
        }
        if self.is("[") {
            return Err(unsupported(self.token.place, name, "a gate with a duration"));
        }
        // Only a global phase acts on no qubit.
        let operands = if name == "gphase" && self.is(";") { vec![] } else { self.operands()? };
        self.end(&format!("the gate {name}"))?;
        Ok(Statement::Call(Call { modifiers, name, arguments, operands, place }))
    }

    fn one_index(&mut self) -> Outcome<Expression<'a>> {
        let index = self.expression()?;
        self.expect("]", "the index")?;
        Ok(index)
    }
}

fn unsupported(place: Place, word: &str, what: &str) -> Refusal {
    place.refuse(format!(
        "{what} is valid OpenQASM but unsupported here ({word}); only unitary circuits with known values can be read"
    ))
}
