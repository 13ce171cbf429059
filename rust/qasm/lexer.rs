//! Cuts OpenQASM text into words, numbers and signs, and keeps what comments say to trueturn.

use super::refusal::{Place, Refusal};

/// What a token is; its text is beside it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// An identifier or keyword.
    Name,
    /// A whole number.
    Integer(i64),
    /// A number with a point or an exponent.
    Real(f64),
    /// A number with a unit of time.
    Duration,
    /// A quoted text, without its quotes.
    Text,
    /// `$3`: a qubit of the machine.
    Machine(u32),
    /// An operator or a bracket.
    Sign,
    /// A pragma, or an annotation such as `@name`, to the end of its line.
    Remark,
    /// After the last token.
    End,
}

/// A token and where it starts.
#[derive(Clone, Copy, Debug)]
pub struct Token<'a> {
    pub kind: Kind,
    pub text: &'a str,
    pub place: Place,
}

/// A comment `// trueturn: text`.
#[derive(Clone, Copy, Debug)]
pub struct Mark<'a> {
    pub text: &'a str,
    pub place: Place,
}

const MARK: &str = "trueturn:";
/// Longest first, so that the first that fits is the right one.
const SIGNS: [&str; 22] = [
    "**=", "<<=", ">>=", "==", "!=", "<=", ">=", "->", "++", "**", "<<", ">>", "&&", "||", "+=", "-=", "*=", "/=",
    "^=", "&=", "|=", "%=",
];

/// Reads one source from its start.
pub struct Lexer<'a> {
    source: u32,
    text: &'a str,
    at: usize,
    line: u32,
    line_start: usize,
    pub marks: Vec<Mark<'a>>,
}

fn starts_name(letter: char) -> bool {
    letter == '_' || letter.is_alphabetic()
}

fn goes_on(letter: char) -> bool {
    letter == '_' || letter.is_alphanumeric()
}

impl<'a> Lexer<'a> {
    pub fn new(source: u32, text: &'a str) -> Self {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        Self { source, text, at: 0, line: 1, line_start: 0, marks: vec![] }
    }

    fn rest(&self) -> &'a str {
        &self.text[self.at..]
    }

    fn byte(&self, ahead: usize) -> u8 {
        self.text.as_bytes().get(self.at + ahead).copied().unwrap_or(0)
    }

    fn place(&self) -> Place {
        // Columns count characters; lines are short, and an error or a token that is kept pays for them only.
        Place { source: self.source, line: self.line, offset: self.at - self.line_start, at: self.at }
    }

    fn newline(&mut self) {
        self.line += 1;
        self.line_start = self.at;
    }

    /// Skips blanks and comments.
    fn skip(&mut self) -> Result<(), Refusal> {
        loop {
            match (self.byte(0), self.byte(1)) {
                (b'\n', _) => {
                    self.at += 1;
                    self.newline();
                }
                (b' ' | b'\t' | b'\r', _) => self.at += 1,
                (b'/', b'/') => {
                    let place = self.place();
                    let line = self.rest().split('\n').next().unwrap_or("");
                    if let Some(text) = line[2..].trim_start().strip_prefix(MARK) {
                        self.marks.push(Mark { text: text.trim(), place });
                    }
                    self.at += line.len();
                }
                (b'/', b'*') => self.block_comment()?,
                _ => return Ok(()),
            }
        }
    }

    fn block_comment(&mut self) -> Result<(), Refusal> {
        let place = self.place();
        let Some(length) = self.rest()[2..].find("*/") else {
            return Err(place.refuse("a comment is opened and never closed (/*); close it with */"));
        };
        let end = self.at + length + 4;
        for (index, _) in self.text[self.at..end].match_indices('\n') {
            self.line += 1;
            self.line_start = self.at + index + 1;
        }
        self.at = end;
        Ok(())
    }

    /// The next token.
    pub fn next(&mut self) -> Result<Token<'a>, Refusal> {
        self.skip()?;
        let place = self.place();
        let rest = self.rest();
        let Some(first) = rest.chars().next() else {
            return Ok(Token { kind: Kind::End, text: "", place });
        };
        let (kind, length) = match first {
            '"' | '\'' => {
                let Some(length) = rest[1..].find([first, '\n']).filter(|&end| rest[1 + end..].starts_with(first))
                else {
                    return Err(place.refuse("a text is opened and not closed on its line; close the quotes"));
                };
                self.at += length + 2;
                return Ok(Token { kind: Kind::Text, text: &rest[1..=length], place });
            }
            '$' => {
                let length = 1 + rest[1..].bytes().take_while(u8::is_ascii_digit).count();
                let Ok(number) = rest[1..length].parse() else {
                    return Err(place.refuse(format!("no number of a qubit ({}); write $0", &rest[..length])));
                };
                (Kind::Machine(number), length)
            }
            '0'..='9' => self.number(place)?,
            '.' if self.byte(1).is_ascii_digit() => self.number(place)?,
            '@' if rest[1..].starts_with(starts_name) => self.remark(),
            letter if starts_name(letter) => {
                let length = rest.find(|c: char| !goes_on(c)).unwrap_or(rest.len());
                match &rest[..length] {
                    "pragma" => self.remark(),
                    _ => (Kind::Name, length),
                }
            }
            '#' if rest.starts_with("#pragma") => self.remark(),
            other => {
                let long = SIGNS.iter().find(|sign| rest.starts_with(*sign));
                if long.is_none() && !"()[]{};:,=+-*/%<>&|^!~@.".contains(other) {
                    return Err(place.refuse(format!("a character that the language does not have ({other:?})")));
                }
                (Kind::Sign, long.map_or(other.len_utf8(), |sign| sign.len()))
            }
        };
        self.at += length;
        Ok(Token { kind, text: &rest[..length], place })
    }

    fn remark(&self) -> (Kind, usize) {
        (Kind::Remark, self.rest().find('\n').unwrap_or(self.rest().len()))
    }

    /// A number: decimal, binary, octal or hexadecimal, `_` between digits, with an exponent or a unit of time.
    fn number(&self, place: Place) -> Result<(Kind, usize), Refusal> {
        let rest = self.rest();
        let bytes = rest.as_bytes();
        let mut end = 0;
        let mut real = false;
        let radix = match rest.get(..2) {
            Some("0x" | "0X") => 16,
            Some("0o" | "0O") => 8,
            Some("0b" | "0B") => 2,
            _ => 10,
        };
        while let Some(&byte) = bytes.get(end) {
            let sign = matches!(byte, b'+' | b'-') && radix == 10 && end > 0 && matches!(bytes[end - 1], b'e' | b'E');
            if !(byte.is_ascii_alphanumeric() || matches!(byte, b'.' | b'_') || sign) {
                break;
            }
            real |= radix == 10 && matches!(byte, b'.' | b'e' | b'E');
            end += 1;
        }
        if rest[end..].starts_with('µ') {
            end += 'µ'.len_utf8() + usize::from(bytes.get(end + 2) == Some(&b's'));
        }
        let text = &rest[..end];
        let bad = || place.refuse(format!("not a number ({}); write 1.5, .5, 1e-3 or 12", clip(text)));
        let unit = text.trim_end_matches(|c: char| c.is_alphabetic());
        if radix == 10 && matches!(&text[unit.len()..], "ns" | "us" | "µs" | "ms" | "s" | "dt") {
            return Ok((Kind::Duration, end));
        }
        let plain = text.replace('_', "");
        if text.ends_with('_') || text.contains("__") || text.starts_with('_') {
            return Err(bad());
        }
        if real {
            let value: f64 = plain.parse().map_err(|_| bad())?;
            if !value.is_finite() {
                return Err(place.refuse(format!("a number beyond what a float holds ({})", clip(text))));
            }
            return Ok((Kind::Real(value), end));
        }
        let digits = if radix == 10 { &plain[..] } else { &plain[2..] };
        if digits.is_empty() || !digits.chars().all(|c| c.is_digit(radix)) {
            return Err(bad());
        }
        let value = i64::from_str_radix(digits, radix)
            .map_err(|_| place.refuse(format!("a whole number beyond 64 bits ({})", clip(text))))?;
        Ok((Kind::Integer(value), end))
    }
}

/// A text short enough for a message.
pub fn clip(text: &str) -> String {
    const LONGEST: usize = 40;
    if text.chars().count() <= LONGEST {
        return text.to_owned();
    }
    text.chars().take(LONGEST).chain("…".chars()).collect()
}
