//! Gates that a file defines: checked once, where they are defined, with every call resolved.

use std::rc::Rc;

use super::calls::{require_arguments, require_qubits};
use super::expressions::Context;
use super::gates::{Gate, Gates};
use super::refusal::{Place, Refusal};
use super::syntax::{Call, Definition, Expression, Operand, Range, Statement};

/// Gates that call each other, counted from the innermost, loops and branches included.
const DEEPEST: u32 = 200;

type Outcome<T> = Result<T, Refusal>;

/// A gate that the file defines.
pub struct Own<'a> {
    pub name: &'a str,
    pub parameters: Vec<&'a str>,
    pub qubits: Vec<&'a str>,
    pub body: Vec<Step<'a>>,
    /// Whether it counts as one gate, whatever its body.
    pub native: bool,
    depth: u32,
}

/// A statement of a gate's body; qubits are numbers of the gate's own.
pub enum Step<'a> {
    Call(Call<'a>, Gate<'a>, Vec<u32>),
    Barrier(Vec<u32>),
    /// `same` where no run differs from another.
    Loop {
        variable: &'a str,
        range: Range<'a>,
        body: Vec<Step<'a>>,
        same: bool,
        place: Place,
    },
    Branch {
        condition: Expression<'a>,
        bodies: [Vec<Step<'a>>; 2],
        place: Place,
    },
}

/// The head of a definition, and what is known at the place of the body that is looked at.
struct Head<'d, 'a> {
    name: &'a str,
    place: Place,
    parameters: &'d [&'a str],
    qubits: &'d [&'a str],
    /// Variables of the loops around.
    variables: Vec<&'a str>,
    /// How deep loops, branches and called gates go from here.
    level: u32,
    deepest: u32,
}

impl<'a> Gates<'a> {
    /// Takes a definition, with every call in it resolved.
    pub fn define(&mut self, definition: Definition<'a>) -> Outcome<()> {
        let Definition { name, parameters, qubits, body, place } = definition;
        if self.known(name) || name == "gphase" {
            return Err(place.refuse(format!("a gate of this name exists already ({name}); choose another name")));
        }
        for (which, names) in [("parameter", &parameters), ("qubit", &qubits)] {
            if let Some(twice) = names.iter().enumerate().find(|(at, name)| names[..*at].contains(name)) {
                return Err(place.refuse(format!("gate {name} has two {which}s of one name ({}); rename one", twice.1)));
            }
        }
        let mut head =
            Head { name, place, parameters: &parameters, qubits: &qubits, variables: vec![], level: 0, deepest: 0 };
        let body = self.resolve(body, &mut head)?;
        let depth = head.deepest;
        if depth > DEEPEST {
            let message = format!("gates call each other more than {DEEPEST} deep ({name}); write them flatter");
            return Err(place.refuse(message));
        }
        let native = self.native.contains(name);
        self.own.insert(name, Gate::Own(Rc::new(Own { name, parameters, qubits, body, native, depth })));
        Ok(())
    }

    fn resolve(&self, body: Vec<Statement<'a>>, head: &mut Head<'_, 'a>) -> Outcome<Vec<Step<'a>>> {
        head.deepest = head.deepest.max(head.level);
        let mut steps = Vec::with_capacity(body.len());
        for statement in body {
            steps.push(match statement {
                Statement::Call(call) => self.resolve_call(call, head)?,
                Statement::Barrier(operands) => {
                    let on = operands.iter().map(|operand| head.local(operand)).collect::<Outcome<Vec<u32>>>()?;
                    Step::Barrier(if on.is_empty() { (0..head.qubits.len() as u32).collect() } else { on })
                }
                Statement::Remark(_) => continue,
                Statement::For { variable, range, body, place } => {
                    range.expressions().into_iter().try_for_each(|value| self.known_names(value, head))?;
                    let same = !body.iter().any(|statement| statement.mentions(variable));
                    head.level += 1;
                    head.variables.push(variable);
                    let body = self.resolve(body, head)?;
                    head.variables.pop();
                    head.level -= 1;
                    Step::Loop { variable, range, body, same, place }
                }
                Statement::If { condition, bodies: [taken, other], place } => {
                    self.known_names(&condition, head)?;
                    head.level += 1;
                    let bodies = [self.resolve(taken, head)?, self.resolve(other, head)?];
                    head.level -= 1;
                    Step::Branch { condition, bodies, place }
                }
                _ => {
                    let name = head.name;
                    let message =
                        format!("the body of gate {name} holds something else than gates ({name}); take it out");
                    return Err(head.place.refuse(message));
                }
            });
        }
        Ok(steps)
    }

    fn resolve_call(&self, call: Call<'a>, head: &mut Head<'_, 'a>) -> Outcome<Step<'a>> {
        if call.name == head.name {
            let name = head.name;
            return Err(call.place.refuse(format!("gate {name} calls itself ({name}); gates cannot recur")));
        }
        let gate = self.find(call.name, call.place)?;
        let on = call.operands.iter().map(|operand| head.local(operand)).collect::<Outcome<Vec<u32>>>()?;
        require_arguments(call.name, gate.parameters(), &call)?;
        call.expressions().try_for_each(|value| self.known_names(value, head))?;
        if call.modifiers.is_empty() {
            require_qubits(&call, gate.qubits(), 0)?;
        }
        if let Some(twice) = on.iter().enumerate().find(|(at, qubit)| on[..*at].contains(qubit)) {
            let shown = head.qubits[*twice.1 as usize];
            return Err(call.place.refuse(format!("{} is applied to one qubit twice ({shown})", call.name)));
        }
        if let Gate::Own(inner) = &gate {
            head.deepest = head.deepest.max(head.level + inner.depth + 1);
        }
        Ok(Step::Call(call, gate, on))
    }

    /// Refuses a name that has no value in the body.
    fn known_names(&self, expression: &Expression, head: &Head) -> Outcome<()> {
        let known = |name: &str| {
            head.parameters.contains(&name) || head.variables.contains(&name) || self.constants.contains_key(name)
        };
        let unknown = |inner: &Expression| match inner {
            Expression::Name(name, _) => !known(name),
            Expression::Entry(..) => true,
            _ => false,
        };
        let context = Context { version: self.version, whole: false, names: &|_| None };
        // The language's own constants are among these.
        expression
            .find_name(&|inner| unknown(inner) && context.value(inner).is_err())
            .map_or(Ok(()), |found| context.value(found).map(drop))
    }
}

impl Head<'_, '_> {
    /// The number of a formal qubit.
    fn local(&self, operand: &Operand) -> Outcome<u32> {
        if operand.index.is_some() || operand.machine.is_some() {
            let shown =
                if operand.machine.is_some() { operand.name.to_owned() } else { format!("{}[0]", operand.name) };
            return Err(operand.place.refuse(format!(
                "qubits of a gate cannot be indexed in its body ({shown} in gate {}); name them one by one",
                self.name
            )));
        }
        let place = self.qubits.iter().position(|qubit| *qubit == operand.name);
        place.map(|place| place as u32).ok_or_else(|| {
            let name = operand.name;
            operand.place.refuse(format!("gate {} has no qubit of this name ({name}); add it", self.name))
        })
    }
}
