//! Gates as OpenQASM text.

use std::fmt::Write;

use super::cancel::Sink;
use super::gate::{Gate, Item};
use crate::error::Result;

/// Bytes that are collected before they are handed on.
const CHUNK: usize = 1 << 18;

/// A sink that writes statements.
pub struct Text<'a> {
    /// Whether repeated bodies become `for` loops (version 3) or are written out (version 2).
    loops: bool,
    collected: String,
    hand_on: &'a mut dyn FnMut(&str) -> Result<()>,
    depth: usize,
}

impl<'a> Text<'a> {
    /// A writer that hands its text on piece by piece.
    pub fn new(loops: bool, hand_on: &'a mut dyn FnMut(&str) -> Result<()>) -> Self {
        Self { loops, collected: String::new(), hand_on, depth: 0 }
    }

    /// Hands on what is left.
    ///
    /// # Errors
    /// Those of the receiver.
    pub fn finish(self) -> Result<()> {
        (self.hand_on)(&self.collected)
    }

    fn item(&mut self, item: &Item) -> Result<()> {
        match item {
            Item::Gate(gate) => self.line(&statement(*gate)),
            Item::Loop(body) if self.loops => {
                // A plain int is 32 bits wide on many targets.
                let kind = if body.repeat < 1 << 31 { "int" } else { "uint[64]" };
                let name = format!("step{}", self.depth);
                self.line(&format!("for {kind} {name} in [1:{}] {{", body.repeat))?;
                self.depth += 1;
                body.items.iter().try_for_each(|item| self.item(item))?;
                self.depth -= 1;
                self.line("}")
            }
            Item::Loop(body) => {
                (0..body.repeat).try_for_each(|_| body.items.iter().try_for_each(|item| self.item(item)))
            }
        }
    }

    fn line(&mut self, text: &str) -> Result<()> {
        for _ in 0..self.depth {
            self.collected.push_str("  ");
        }
        self.collected.push_str(text);
        self.collected.push('\n');
        if self.collected.len() >= CHUNK {
            (self.hand_on)(&self.collected)?;
            self.collected.clear();
        }
        Ok(())
    }
}

impl Sink for Text<'_> {
    fn take(&mut self, item: Item) -> Result<()> {
        self.item(&item)
    }
}

fn statement(gate: Gate) -> String {
    match gate {
        Gate::H(q) => format!("h q[{q}];"),
        Gate::S(q) => format!("s q[{q}];"),
        Gate::Sdg(q) => format!("sdg q[{q}];"),
        Gate::Rx(q, angle) => format!("rx({}) q[{q}];", real(angle)),
        Gate::Ry(q, angle) => format!("ry({}) q[{q}];", real(angle)),
        Gate::Rz(q, angle) => format!("rz({}) q[{q}];", real(angle)),
        Gate::Cx(a, b) => format!("cx q[{a}], q[{b}];"),
        Gate::Cz(a, b) => format!("cz q[{a}], q[{b}];"),
        Gate::Swap(a, b) => format!("swap q[{a}], q[{b}];"),
        Gate::Zz(a, b, angle) => format!("rzz({}) q[{a}], q[{b}];", real(angle)),
    }
}

/// The shortest digits that read back as the same float, always with a point: version 2 asks for one in a real.
pub fn real(value: f64) -> String {
    let mut text = String::new();
    // Writing to a string cannot fail.
    let _ = write!(text, "{value:?}");
    if !text.contains('.') {
        let place = text.find('e').unwrap_or(text.len());
        text.insert_str(place, ".0");
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reals_have_a_point_and_read_back() {
        for value in [0.1, -0.0, 1e-7, 1e300, 5e-324, 1.0 / 3.0, 123_456_789.0, 1e16, -2.5e-9] {
            let text = real(value);
            assert!(text.contains('.'), "{text}");
            assert_eq!(text.parse::<f64>().unwrap().to_bits(), value.to_bits());
        }
    }
}
