//! Loops and branches with known values: a body that does the same each time becomes a block, another is carried out value
//! by value.

use super::expressions::Context;
use super::ranges::Values;
use super::reader::{Pulse, Reader, Stop};
use super::refusal::Place;
use super::syntax::{Expression, Range, Statement};

impl<'a> Reader<'a> {
    pub fn repeat(
        &mut self,
        variable: &'a str,
        range: &Range<'a>,
        body: &[Statement<'a>],
        place: Place,
        pulse: Pulse,
    ) -> Result<(), Stop> {
        let values = Values::of(range, place, &|value, place| self.registers.whole(value, place))?;
        let count = values.count();
        if count == 0 {
            return Ok(());
        }
        self.registers.open();
        let outcome = if count > 1 && !body.iter().any(|statement| statement.mentions(variable)) {
            self.repeat_once(body, count, place, pulse)
        } else {
            self.gates.spend(count.saturating_mul(body.len().max(1) as u64), place)?;
            (0..count).try_for_each(|at| {
                self.registers.close();
                self.registers.open();
                self.registers.set(variable, values.at(at));
                body.iter().try_for_each(|statement| self.carry_out(statement, pulse))
            })
        };
        self.registers.close();
        outcome
    }

    /// A body that does the same each time is read once and becomes a block.
    fn repeat_once(&mut self, body: &[Statement<'a>], count: u64, place: Place, pulse: Pulse) -> Result<(), Stop> {
        self.gates.spend(body.len() as u64, place)?;
        let fresh = self.parts[self.part].fresh();
        let outer = std::mem::replace(&mut self.parts[self.part], fresh);
        self.gates.tally.open();
        let outcome = body.iter().try_for_each(|statement| self.carry_out(statement, pulse));
        let counted = self.gates.tally.close();
        let inner = std::mem::replace(&mut self.parts[self.part], outer);
        outcome?;
        self.gates.tally.repeat(counted, count);
        Ok(self.parts[self.part].repeat(inner, count, place)?)
    }

    /// Carries out the body that a condition picks.
    pub fn branch(
        &mut self,
        condition: &Expression<'a>,
        bodies: &[Vec<Statement<'a>>; 2],
        place: Place,
        pulse: Pulse,
    ) -> Result<(), Stop> {
        let measured = |inner: &Expression| match inner {
            Expression::Name(name, _) => self.registers.is_bits(name),
            Expression::Entry(..) => true,
            _ => false,
        };
        if let Some(Expression::Name(name, _) | Expression::Entry(name, _)) = condition.find_name(&measured) {
            let message = format!(
                "a branch on measured bits is valid OpenQASM but unsupported here (if, {name}); only unitary circuits \
                 with known values can be read"
            );
            return Err(place.refuse(message).into());
        }
        let names = |name: &str| self.registers.value(name);
        let context = Context { version: self.registers.version, whole: true, names: &names };
        let taken = context.holds(condition, place)?;
        self.registers.open();
        let outcome = bodies[usize::from(!taken)].iter().try_for_each(|statement| self.carry_out(statement, pulse));
        self.registers.close();
        outcome
    }
}
