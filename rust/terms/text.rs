//! The written notation: `-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25`.
//!
//! ```text
//! operator = [sign] term { sign term }          sign   = "+" | "-"
//! term     = number { factor } | factor { factor }
//! factor   = ("X" | "Y" | "Z") "_" (digits | "{" digits "}")
//! number   = decimal digits with an optional point and exponent: 2, .5, 1e-3
//! ```
//!
//! A bare number is the identity term. A line break ends a term, so that a file may hold one term a line without signs between
//! them, except after a sign, whose term may follow on the next line. `#` starts a comment that ends with its line.
//! Factors on one qubit multiply out; the term must stay Hermitian.

use std::fmt;

use super::{MAX_QUBITS, Terms};
use crate::error::{Error, Result};
use crate::pauli::PauliString;

const EXPECTED_TERM: &str = "expected a term: a real number, factors such as X_0 Z_3, or both";
const EXPECTED_MORE: &str = "expected a factor such as X_0, a sign, or the end of the line";

impl Terms {
    /// Reads the written notation.
    ///
    /// # Errors
    ///
    /// [`Error::Term`] with line, column, the offending text and what was expected; [`Error::Operator`] if `qubits` is out
    /// of range or repeated terms overflow.
    pub fn parse(text: &str, qubits: Option<u32>) -> Result<Self> {
        let limit = match qubits {
            Some(given) => super::checked_qubits(given, 0)?,
            None => MAX_QUBITS,
        };
        let mut reader = Reader::new(text, limit);
        let mut terms = Vec::new();
        while let Some(sign) = reader.sign_or_end(terms.is_empty())? {
            let (string, coefficient) = reader.term()?;
            terms.push((string, sign * coefficient));
        }
        Self::new(qubits, terms)
    }
}

/// Reads factors alone, such as `X_0 Z_3`; nothing at all is the identity. The sign is that of the multiplied-out factors.
///
/// # Errors
///
/// [`Error::Term`] as for [`Terms::parse`].
pub fn parse_factors(text: &str, qubits: Option<u32>) -> Result<(PauliString, f64)> {
    let limit = match qubits {
        Some(given) => super::checked_qubits(given, 0)?,
        None => MAX_QUBITS,
    };
    let mut reader = Reader::new(text, limit);
    reader.skip_blank();
    let factors = reader.factors()?;
    if reader.peek().is_some() {
        return Err(
            reader.refuse_here("expected factors such as X_0 Z_3 and nothing else; the coefficient stands apart")
        );
    }
    Ok(factors)
}

struct Reader<'a> {
    text: &'a str,
    at: usize,
    limit: u32,
}

impl<'a> Reader<'a> {
    fn new(text: &'a str, limit: u32) -> Self {
        Self { text, at: 0, limit }
    }

    fn peek(&self) -> Option<char> {
        self.text[self.at..].chars().next()
    }

    /// Skips characters while they satisfy `wanted` and returns what was skipped.
    fn take_while(&mut self, wanted: impl Fn(char) -> bool) -> &'a str {
        let rest = &self.text[self.at..];
        let length = rest.find(|c| !wanted(c)).unwrap_or(rest.len());
        self.at += length;
        &rest[..length]
    }

    fn take(&mut self, wanted: char) -> bool {
        let found = self.peek() == Some(wanted);
        if found {
            self.at += wanted.len_utf8();
        }
        found
    }

    /// Skips blanks within a line, and a comment.
    fn skip_blank(&mut self) {
        self.take_while(|c| c.is_whitespace() && c != '\n');
        if self.peek() == Some('#') {
            self.take_while(|c| c != '\n');
        }
    }

    /// Skips blanks, comments and line breaks; says whether there was a line break.
    fn skip_lines(&mut self) -> bool {
        self.skip_blank();
        let mut broken = false;
        while self.take('\n') {
            broken = true;
            self.skip_blank();
        }
        broken
    }

    /// The sign of the next term, or `None` at the end of the text.
    fn sign_or_end(&mut self, first: bool) -> Result<Option<f64>> {
        let new_line = self.skip_lines();
        let sign = match self.peek() {
            None if first => {
                return Err(self.refuse_here("expected at least one term; write 0.0 for the zero operator"));
            }
            None => return Ok(None),
            Some('+') => 1.0,
            Some('-') => -1.0,
            Some(_) if first || new_line => return Ok(Some(1.0)),
            Some(_) => return Err(self.refuse_here(EXPECTED_MORE)),
        };
        self.at += 1;
        self.skip_lines();
        if matches!(self.peek(), Some('+' | '-')) {
            return Err(self.refuse_here("expected a term after the sign; write one sign only"));
        }
        Ok(Some(sign))
    }

    fn term(&mut self) -> Result<(PauliString, f64)> {
        let coefficient = match self.peek() {
            Some('0'..='9' | '.') => Some(self.number()?),
            Some('X' | 'Y' | 'Z') => None,
            _ => return Err(self.refuse_here(EXPECTED_TERM)),
        };
        self.skip_blank();
        let (string, sign) = self.factors()?;
        Ok((string, sign * coefficient.unwrap_or(1.0)))
    }

    fn number(&mut self) -> Result<f64> {
        let start = self.at;
        let mut digits = self.take_while(|c| c.is_ascii_digit()).len();
        if self.take('.') {
            digits += self.take_while(|c| c.is_ascii_digit()).len();
        }
        if digits == 0 {
            return Err(self.refuse_word(start, "expected a number such as 2, .5 or 1e-3"));
        }
        if matches!(self.peek(), Some('e' | 'E')) {
            self.at += 1;
            if !self.take('-') {
                self.take('+');
            }
            if self.take_while(|c| c.is_ascii_digit()).is_empty() {
                return Err(self.refuse_word(start, "expected digits in the exponent, as in 1e-3"));
            }
        }
        let literal = &self.text[start..self.at];
        if matches!(self.peek(), Some('i' | 'j' | 'I' | 'J')) {
            let advice = "complex coefficients are not Hermitian; expected a real number";
            return Err(self.refuse_word(start, advice));
        }
        let value: f64 = literal.parse().unwrap_or(f64::NAN);
        let mantissa = literal.split(['e', 'E']).next().unwrap_or(literal);
        let lost = value == 0.0 && mantissa.contains(|c: char| c.is_ascii_digit() && c != '0');
        if !value.is_finite() || lost {
            return Err(self.refuse(start, self.at, "expected a number within the range of double precision"));
        }
        Ok(value)
    }

    /// Any number of factors, multiplied out, with the sign of the product.
    fn factors(&mut self) -> Result<(PauliString, f64)> {
        let start = self.at;
        let mut end = start;
        let mut string = PauliString::IDENTITY;
        let mut turns = 0;
        while matches!(self.peek(), Some('X' | 'Y' | 'Z')) {
            let (product, more) = string.times(self.factor()?);
            string = product;
            turns = (turns + more) & 3;
            end = self.at;
            self.skip_blank();
        }
        if turns & 1 == 1 {
            let advice = format!(
                "the factors multiply to {} {}, which is not Hermitian; expected at most one factor for each qubit",
                if turns == 1 { "i" } else { "-i" },
                Factors(string)
            );
            return Err(self.refuse(start, end, &advice));
        }
        Ok((string, if turns == 0 { 1.0 } else { -1.0 }))
    }

    fn factor(&mut self) -> Result<PauliString> {
        let start = self.at;
        let letter = self.peek();
        self.at += 1;
        if !self.take('_') {
            return Err(self.refuse_word(start, "expected an underscore and a qubit number, as in X_0"));
        }
        let braced = self.take('{');
        let digits = self.take_while(|c| c.is_ascii_digit());
        if digits.is_empty() || (braced && !self.take('}')) {
            return Err(self.refuse_word(start, "expected a qubit number, as in X_0 or X_{10}"));
        }
        let qubit = digits.parse().unwrap_or(u32::MAX);
        if qubit >= self.limit {
            let advice = format!("expected a qubit number from 0 to {}", self.limit - 1);
            return Err(self.refuse(start, self.at, &advice));
        }
        let bit = 1u128 << qubit;
        Ok(match letter {
            Some('X') => PauliString { x: bit, z: 0 },
            Some('Y') => PauliString { x: bit, z: bit },
            _ => PauliString { x: 0, z: bit },
        })
    }

    /// An error about the word that contains or starts at `start`.
    #[cold]
    fn refuse_word(&self, start: usize, expected: &str) -> Error {
        let rest = &self.text[self.at..];
        let end = rest.find(char::is_whitespace).map_or(self.text.len(), |length| self.at + length);
        self.refuse(start, end, expected)
    }

    /// An error about the word at the present position, with advice fitting to what stands there.
    #[cold]
    fn refuse_here(&self, expected: &str) -> Error {
        let word = self.text[self.at..].split_whitespace().next().unwrap_or("").to_ascii_lowercase();
        let number = word.trim_start_matches(['+', '-']);
        let hint = if number.starts_with("nan") || number.starts_with("inf") {
            "numbers must be finite; "
        } else if word.starts_with('*') {
            "numbers and factors stand side by side, without '*'; "
        } else if word.starts_with('(') || word == "i" || word == "j" || word == "1j" {
            "coefficients are real numbers without brackets; "
        } else if word.starts_with("i_") {
            "qubits that are not named carry the identity; "
        } else if word.starts_with("x_") || word.starts_with("y_") || word.starts_with("z_") {
            "Pauli letters are capitals; "
        } else {
            ""
        };
        self.refuse_word(self.at, &format!("{hint}{expected}"))
    }

    #[cold]
    fn refuse(&self, start: usize, end: usize, expected: &str) -> Error {
        let before = &self.text[..start];
        let line_start = before.rfind('\n').map_or(0, |place| place + 1);
        Error::Term {
            line: before.matches('\n').count() + 1,
            column: before[line_start..].chars().count() + 1,
            text: self.text[start..end].to_owned(),
            expected: expected.to_owned(),
        }
    }
}

/// Prints a string as its factors, lowest qubit first; the identity as `1`.
pub(crate) struct Factors(pub PauliString);

impl fmt::Display for Factors {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.0 == PauliString::IDENTITY {
            return f.write_str("1");
        }
        let mut left = self.0.support();
        let mut gap = "";
        while left != 0 {
            let qubit = left.trailing_zeros();
            let letter = match ((self.0.x >> qubit) & 1, (self.0.z >> qubit) & 1) {
                (1, 0) => 'X',
                (1, _) => 'Y',
                _ => 'Z',
            };
            write!(f, "{gap}{letter}_{qubit}")?;
            gap = " ";
            left &= left - 1;
        }
        Ok(())
    }
}

/// Prints the notation that [`Terms::parse`] reads back exactly: each number is the shortest that rounds to the same double.
impl fmt::Display for Terms {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.is_empty() {
            return f.write_str("0.0");
        }
        for (number, (string, coefficient)) in self.iter().enumerate() {
            match (number, coefficient < 0.0) {
                (0, false) => {}
                (0, true) => f.write_str("-")?,
                (_, false) => f.write_str(" + ")?,
                (_, true) => f.write_str(" - ")?,
            }
            write!(f, "{:?}", coefficient.abs())?;
            if string != PauliString::IDENTITY {
                write!(f, " {}", Factors(string))?;
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn printed(text: &str) -> String {
        Terms::parse(text, None).unwrap().to_string()
    }

    fn refused(text: &str) -> (usize, usize, String, String) {
        match Terms::parse(text, None) {
            Err(Error::Term { line, column, text, expected }) => (line, column, text, expected),
            other => panic!("{text:?} gave {other:?}"),
        }
    }

    #[test]
    fn the_notation_is_read_and_printed() {
        assert_eq!(printed("-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25"), "-1.0 Z_0 Z_1 + 0.5 X_0 - 0.25");
        assert_eq!(printed("2Z_{10}X_3 - .5"), "2.0 X_3 Z_10 - 0.5");
        assert_eq!(printed("+ 1e-3 Y_0"), "0.001 Y_0");
        assert_eq!(printed("0"), "0.0");
        assert_eq!(printed("X_0\n# note\n- 2. Y_1  # more\n3 Z_0 +\n X_0\n"), "2.0 X_0 - 2.0 Y_1 + 3.0 Z_0");
    }

    #[test]
    fn factors_on_one_qubit_multiply_out() {
        assert_eq!(printed("2 X_0 X_0"), "2.0");
        assert_eq!(printed("X_0 Y_0 X_0"), "-1.0 Y_0");
        assert_eq!(printed("X_0 Y_0 X_1 Y_1"), "-1.0 Z_0 Z_1");
        let (_, column, text, expected) = refused("Z_1 + X_0 Y_0 + Z_2");
        assert_eq!((column, text.as_str()), (7, "X_0 Y_0"));
        assert!(expected.contains("i Z_0") && expected.contains("not Hermitian"));
    }

    #[test]
    fn errors_are_located() {
        assert_eq!(refused("X_0 +\n 2 * Z_1").0, 2);
        assert_eq!(refused("X_0 +\n 2 * Z_1").1, 4);
        for text in
            ["", "  # nothing", "+", "X_0 -", "X_0 + + Z_0", "X", "X_", "X_{1", "X_128", "Q_0", "x_0", "I_0", "1e"]
        {
            refused(text);
        }
        for text in ["nan X_0", "inf", "1e999", "1e-999 X_0", "2j X_0", "(1+2j) X_0", "1.2.3", "X_0 2", "é", "X_é", "."]
        {
            refused(text);
        }
        assert!(Terms::parse("X_3", Some(3)).is_err());
    }
}
