//! The one door through which long work leaves the interpreter lock.

use std::panic::{AssertUnwindSafe, catch_unwind};
use std::thread;
use std::time::{Duration, Instant};

use pyo3::exceptions::PyKeyboardInterrupt;
use pyo3::prelude::*;

use super::error::to_python;
use crate::error::{Error, Result};
use crate::team::{Control, no_thread};
use crate::terms::Check;

/// Time between two looks for signals; an interrupt is heard within it.
const LOOK: Duration = Duration::from_millis(25);

/// Amplitudes times passes below which work runs on the calling thread without a watcher: less than a look.
const BRIEF: u64 = 1 << 22;

/// What a run that is abandoned half-way leaves behind.
#[derive(Clone, Copy, PartialEq, Eq)]
pub enum Spoils {
    /// A state of the caller's that holds nothing meaningful.
    State,
    /// Nothing that anybody sees.
    Nothing,
}

/// Runs `work` without the interpreter lock while this thread looks for Ctrl-C and reports progress.
///
/// The first Ctrl-C is acknowledged on stderr and stops the run after the current pass, the second at once. `progress` is
/// called with finished passes and passes in all; an exception of its own stops the run and passes through.
pub fn run<T: Send>(
    py: Python<'_>,
    weight: u64,
    spoils: Spoils,
    progress: Option<&Py<PyAny>>,
    work: impl FnOnce(&Control) -> Result<T> + Send,
) -> PyResult<T> {
    let control = Control::default();
    let guarded = || {
        catch_unwind(AssertUnwindSafe(|| work(&control)))
            .unwrap_or_else(|_| Err(Error::Internal { message: "a computation panicked".into() }))
    };
    if weight < BRIEF && progress.is_none() {
        return py.detach(guarded).map_err(|error| to_python(py, error));
    }
    let (outcome, raised) = py.detach(|| {
        thread::scope(|scope| {
            let caller = thread::current();
            let carry = move || {
                let outcome = guarded();
                caller.unpark();
                outcome
            };
            let Ok(worker) = thread::Builder::new().spawn_scoped(scope, carry) else {
                return (Err(no_thread(1)), None);
            };
            let mut raised = None;
            let mut reported = 0;
            while !worker.is_finished() {
                thread::park_timeout(LOOK);
                watch(&control, progress, &mut raised, &mut reported);
            }
            let lost = || Err(Error::Internal { message: "a computation's thread was lost".into() });
            (worker.join().unwrap_or_else(|_| lost()), raised)
        })
    });
    match (outcome, raised) {
        (Err(error @ Error::Internal { .. }), _) | (Err(error), None) => Err(to_python(py, error)),
        // A spoiled state must be told as such even where an exception is waiting.
        (Err(error @ Error::Abandoned), _) if spoils == Spoils::State => Err(to_python(py, error)),
        (_, Some(raised)) => Err(raised),
        (Ok(value), None) => Ok(value),
    }
}

/// Runs algebra on this thread without the interpreter lock; `work` calls the check it is given now and then, which hears
/// Ctrl-C.
pub fn run_checked<T: Send>(py: Python<'_>, work: impl FnOnce(Check) -> Result<T> + Send) -> PyResult<T> {
    let mut interrupt = None;
    let outcome = py.detach(|| {
        let mut asked = Instant::now();
        let mut check = || {
            if asked.elapsed() < LOOK {
                return Ok(());
            }
            asked = Instant::now();
            Python::attach(|py| py.check_signals()).map_err(|raised| {
                interrupt = Some(raised);
                Error::Cancelled { passes_done: 0 }
            })
        };
        work(&mut check)
    });
    match interrupt {
        Some(raised) => Err(raised),
        None => outcome.map_err(|error| to_python(py, error)),
    }
}

/// One look: signals first, then progress if it moved.
fn watch(control: &Control, progress: Option<&Py<PyAny>>, raised: &mut Option<PyErr>, reported: &mut u64) {
    let undisturbed = raised.is_none();
    Python::attach(|py| {
        let mut stop = |failure: PyErr| {
            control.request_stop();
            if raised.is_none() && failure.is_instance_of::<PyKeyboardInterrupt>(py) {
                acknowledge(py);
            }
            raised.get_or_insert(failure);
        };
        let signals = py.check_signals();
        let calm = signals.is_ok();
        signals.unwrap_or_else(&mut stop);
        let (done, total) = control.progress();
        if let (Some(callback), true, true) = (progress, done != *reported, calm && undisturbed) {
            *reported = done;
            // Ctrl-C can also be heard inside the callback.
            callback.call1(py, (done, total)).map(drop).unwrap_or_else(stop);
        }
    });
}

fn acknowledge(py: Python<'_>) {
    let said = "\ntrueturn: stopping after the current pass; press Ctrl-C again to stop at once and spoil the state\n";
    // A closed stderr must not hide the interrupt.
    let _ =
        py.import("sys").and_then(|sys| sys.getattr("stderr")).and_then(|stderr| stderr.call_method1("write", (said,)));
}
