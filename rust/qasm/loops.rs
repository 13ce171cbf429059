//! Loops with known bounds: a body that does the same each time becomes a block, another is carried out value by value.

use super::conjugation::Builder;
use super::reader::{Pulse, Reader, Stop};
use super::refusal::Place;
use super::syntax::{Range, Statement};

impl<'a> Reader<'a> {
    pub fn repeat(
        &mut self,
        variable: &'a str,
        range: &Range<'a>,
        body: &[Statement<'a>],
        place: Place,
        pulse: Pulse,
    ) -> Result<(), Stop> {
        let set = self.registers.set_values(range, place)?;
        let (start, step, count) = match (range, &set) {
            (Range::Span(span), _) => self.registers.span(span)?,
            (_, Some(set)) => (0, 1, set.len() as u64),
            _ => (0, 1, 0),
        };
        if count == 0 {
            return Ok(());
        }
        self.registers.open();
        let outcome = if count > 1 && !body.iter().any(|statement| statement.mentions(variable)) {
            self.repeat_once(body, count, place, pulse)
        } else {
            self.gates.spend(count.saturating_mul(body.len().max(1) as u64), place)?;
            (0..count).try_for_each(|at| {
                let value = match &set {
                    Some(set) => set[at as usize],
                    // Both ends are 64-bit numbers and this lies between them.
                    None => start.wrapping_add((at as i64).wrapping_mul(step)),
                };
                self.registers.close();
                self.registers.open();
                self.registers.set(variable, value);
                body.iter().try_for_each(|statement| self.carry_out(statement, pulse))
            })
        };
        self.registers.close();
        outcome
    }

    /// A body that does the same each time is read once and becomes a block.
    fn repeat_once(&mut self, body: &[Statement<'a>], count: u64, place: Place, pulse: Pulse) -> Result<(), Stop> {
        self.gates.spend(body.len() as u64, place)?;
        let fresh = Builder::new(self.registers.qubits, self.parts[self.part].keep());
        let outer = std::mem::replace(&mut self.parts[self.part], fresh);
        let outcome = body.iter().try_for_each(|statement| self.carry_out(statement, pulse));
        let inner = std::mem::replace(&mut self.parts[self.part], outer);
        outcome?;
        let builder = &mut self.parts[self.part];
        builder.turned = [0, 1].map(|which| builder.turned[which].saturating_add(inner.turned[which]));
        let refused = |error: crate::error::Error| place.refuse(format!("a loop of {count} repeats: {error}"));
        let mut once = inner.finish().map_err(refused)?;
        if once.qubits() < self.registers.qubits {
            once = once.widened(self.registers.qubits);
        }
        let many = once.times(count).map_err(refused)?;
        builder.widen(self.registers.qubits.max(builder.qubits()));
        builder.append(&many);
        Ok(())
    }
}
