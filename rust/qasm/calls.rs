//! Gates applied: the steps of a library gate, the body of a gate of the file, and modifiers on either.

use std::rc::Rc;

use super::conjugation::{Builder, Keep};
use super::definitions::{Own, Step};
use super::expressions::{Context, Value};
use super::gates::{Gate, Gates};
use super::modifiers::{Applied, Product, controls, modified};
use super::ranges::Values;
use super::refusal::{Place, Refusal};
use super::syntax::{Call, Expression};

/// Rotations that one gate with modifiers may take: fifteen controls.
const MOST_ROTATIONS: u64 = 1 << 16;

type Outcome<T> = Result<T, Refusal>;

/// Where the body of a gate of the file is carried out.
struct Inside<'c, 'a> {
    own: &'c Own<'a>,
    on: &'c [u32],
    undo: bool,
    place: Place,
}

impl Inside<'_, '_> {
    /// A fault inside depends on the values of this call, so both places matter; the call's is the user's.
    fn fault(&self, refusal: Refusal) -> Refusal {
        self.place.refuse(format!("in gate {}, line {}: {}", self.own.name, refusal.place.line, refusal.message))
    }
}

/// Parameters and variables of loops, the innermost last.
type Scope<'a> = Vec<(&'a str, Value)>;

impl<'a> Gates<'a> {
    /// Applies a gate, modifiers and all, to qubits of the builder; `undo` for its inverse.
    #[expect(clippy::too_many_arguments, reason = "a call has these parts")]
    pub fn apply(
        &mut self,
        into: &mut Builder,
        gate: &Gate<'a>,
        modifiers: &[Applied],
        arguments: &[f64],
        on: &[u32],
        undo: bool,
        place: Place,
    ) -> Outcome<()> {
        if modifiers.iter().all(|modifier| matches!(modifier, Applied::Inverse)) {
            return self.plain(into, gate, arguments, on, undo ^ (modifiers.len() % 2 == 1), place);
        }
        let qubits = gate.qubits() as u32;
        let names: Vec<u32> = (0..qubits).collect();
        let mut builder = Builder::new(qubits, Keep::Everything);
        self.tally.open();
        self.plain(&mut builder, gate, arguments, &names, false, place)?;
        let body = self.tally.close();
        let mut product = finished(builder, self.limit, place)?;
        if let Gate::Own(_) = gate {
            // The first way of reading that leaves no Clifford keeps ladders together.
            for keep in [Keep::Nothing, Keep::Diagonal, Keep::Rotations] {
                let mut builder = Builder::new(qubits, keep);
                self.tally.open();
                self.plain(&mut builder, gate, arguments, &names, false, place)?;
                self.tally.close();
                let read = builder.finish().map_err(|error| place.refuse(error.to_string()))?;
                if read.frame().is_none() && read.count() <= product.list.len() as u64 {
                    product = Product::of(&read, self.limit).unwrap_or(product);
                    break;
                }
            }
        }
        let mut product = modified(product, qubits, modifiers, self.limit.min(MOST_ROTATIONS), place)?;
        self.spend(product.list.len() as u64, place)?;
        let by = matches!(gate, Gate::Own(own) if !own.native).then_some(modifiers);
        self.tally.modified(body, by, &product, on, undo);
        if undo {
            product = product.inverse();
        }
        product.emit(into, on, arguments.is_empty());
        Ok(())
    }

    fn plain(
        &mut self,
        into: &mut Builder,
        gate: &Gate<'a>,
        arguments: &[f64],
        on: &[u32],
        undo: bool,
        place: Place,
    ) -> Outcome<()> {
        let own = match gate {
            Gate::Standard(gate) if gate.qubits == 0 => {
                into.phase(if undo { -arguments[0] } else { arguments[0] });
                return Ok(());
            }
            Gate::Standard(gate) => {
                self.tally.standard(gate, arguments, on);
                let count = gate.moves.len();
                for at in 0..count {
                    into.step(&gate.moves[if undo { count - 1 - at } else { at }], arguments, on, undo);
                }
                return Ok(());
            }
            Gate::Own(own) => Rc::clone(own),
        };
        let mut scope: Scope<'a> =
            own.parameters.iter().zip(arguments).map(|(name, value)| (*name, Value::Real(*value))).collect();
        let inside = Inside { own: &own, on, undo, place };
        if !own.native {
            return self.steps(into, &inside, &own.body, &mut scope);
        }
        self.tally.open();
        self.steps(into, &inside, &own.body, &mut scope)?;
        let body = self.tally.close();
        self.tally.native(own.name, &body, on);
        Ok(())
    }

    fn steps(
        &mut self,
        into: &mut Builder,
        inside: &Inside<'_, 'a>,
        body: &[Step<'a>],
        scope: &mut Scope<'a>,
    ) -> Outcome<()> {
        self.spend(body.len() as u64, inside.place)?;
        for at in 0..body.len() {
            let step = &body[if inside.undo { body.len() - 1 - at } else { at }];
            let constants = &self.constants;
            let names = |name: &str| {
                let own = scope.iter().rev().find(|(known, _)| *known == name).map(|(_, value)| *value);
                own.or_else(|| constants.get(name).copied())
            };
            let context = Context { version: self.version, whole: true, names: &names };
            let fault = |refusal| inside.fault(refusal);
            match step {
                Step::Call(call, gate, locals) => {
                    let arguments = self.arguments(call, &names).map_err(fault)?;
                    let modifiers = self.modifiers(call, &names).map_err(fault)?;
                    require_qubits(call, gate.qubits(), controls(&modifiers)).map_err(fault)?;
                    let on: Vec<u32> = locals.iter().map(|&local| inside.on[local as usize]).collect();
                    self.apply(into, gate, &modifiers, &arguments, &on, inside.undo, inside.place)?;
                }
                Step::Barrier(locals) => {
                    self.tally.barrier(locals.iter().map(|&local| inside.on[local as usize]));
                }
                Step::Branch { condition, bodies, place } => {
                    let taken = context.holds(condition, *place).map_err(fault)?;
                    self.steps(into, inside, &bodies[usize::from(!taken)], scope)?;
                }
                Step::Loop { variable, range, body, same, place } => {
                    let whole = |value: &Expression, place| context.whole_number(value, place);
                    let values = Values::of(range, *place, &whole).map_err(fault)?;
                    if *same && values.count() > 1 {
                        let mut once = into.fresh();
                        self.tally.open();
                        // The variable has no value: nothing mentions it.
                        self.steps(&mut once, inside, body, scope)?;
                        let counted = self.tally.close();
                        self.tally.repeat(counted, values.count());
                        into.repeat(once, values.count(), *place).map_err(fault)?;
                        continue;
                    }
                    self.spend(values.count(), inside.place)?;
                    for at in 0..values.count() {
                        let at = if inside.undo { values.count() - 1 - at } else { at };
                        scope.push((*variable, Value::Whole(values.at(at))));
                        self.steps(into, inside, body, scope)?;
                        scope.pop();
                    }
                }
            }
        }
        Ok(())
    }
}

fn finished(builder: Builder, limit: u64, place: Place) -> Outcome<Product> {
    let circuit = builder.finish().map_err(|error| place.refuse(error.to_string()))?;
    Product::of(&circuit, limit).ok_or_else(|| place.refuse("a gate of too many rotations for a modifier; split it"))
}

pub fn require_arguments(name: &str, wanted: usize, call: &Call) -> Outcome<()> {
    let given = call.arguments.len();
    if given == wanted {
        return Ok(());
    }
    let angles = if wanted == 1 { "angle" } else { "angles" };
    Err(call.place.refuse(format!("{name} takes {wanted} {angles} ({given} given); give {wanted}")))
}

pub fn require_qubits(call: &Call, own: usize, controls: u64) -> Outcome<()> {
    let (given, wanted) = (call.operands.len() as u64, own as u64 + controls);
    if given == wanted {
        return Ok(());
    }
    let with = if controls > 0 { " with its controls" } else { "" };
    let qubits = if wanted == 1 { "qubit" } else { "qubits" };
    Err(call.place.refuse(format!("{}{with} takes {wanted} {qubits} ({given} given); give {wanted}", call.name)))
}
