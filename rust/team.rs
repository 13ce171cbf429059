//! Workers that walk through passes in step, and the flags by which a caller watches and stops them.
//!
//! A run starts its workers once and keeps them for all its passes; between two passes they meet at a barrier that spins
//! briefly and then yields. Work is cut by index, never by timing, so results do not depend on the number of workers. A
//! pool that outlives the run was left out: starting a thread costs tens of microseconds, small states run on the calling
//! thread alone, and with no threads left over a forked child has nothing to inherit.

use std::ops::Range;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::atomic::{AtomicBool, AtomicU8, AtomicU64, AtomicUsize, Ordering};

use crate::error::{Error, Result};

/// Amplitudes below which a run uses one worker, whatever was asked.
pub const SERIAL_BELOW: usize = 1 << 16;

const CONTINUE: u8 = 0;
const STOP_AFTER_PASS: u8 = 1;
const STOP_AT_ONCE: u8 = 2;

/// Requests to stop, and progress.
#[derive(Debug, Default)]
pub struct Control {
    request: AtomicU8,
    passes_done: AtomicU64,
    passes_total: AtomicU64,
}

impl Control {
    /// Asks the run to stop after the current pass; asked again, to stop at once and leave the state spoiled.
    pub fn request_stop(&self) {
        let next = match self.request.load(Ordering::Relaxed) {
            CONTINUE => STOP_AFTER_PASS,
            _ => STOP_AT_ONCE,
        };
        self.request.store(next, Ordering::Relaxed);
    }

    /// Finished passes and how many there are in all.
    pub fn progress(&self) -> (u64, u64) {
        (self.passes_done.load(Ordering::Relaxed), self.passes_total.load(Ordering::Relaxed))
    }

    /// Ends a pass that the calling thread made alone, and tells whether to go on.
    ///
    /// # Errors
    /// [`Error::Cancelled`] after a request to stop.
    pub fn pass_done(&self) -> Result<()> {
        let passes_done = 1 + self.passes_done.fetch_add(1, Ordering::Relaxed);
        match self.request.load(Ordering::Relaxed) {
            CONTINUE => Ok(()),
            _ => Err(Error::Cancelled { passes_done }),
        }
    }

    /// Learns, outside of passes, whether to go on.
    ///
    /// # Errors
    /// [`Error::Cancelled`] after a request to stop.
    pub fn go_on(&self) -> Result<()> {
        match self.request.load(Ordering::Relaxed) {
            CONTINUE => Ok(()),
            _ => Err(Error::Cancelled { passes_done: self.passes_done.load(Ordering::Relaxed) }),
        }
    }

    /// Says how many passes the run has.
    pub fn expect(&self, passes: u64) {
        self.passes_total.store(passes, Ordering::Relaxed);
    }
}

/// What a run did.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Run {
    /// Passes that were finished.
    pub passes: u64,
    /// Workers that took part in every pass.
    pub workers: usize,
}

/// Workers for a state of this many amplitudes when `asked` are allowed.
pub fn workers_for(asked: usize, amplitudes: usize) -> usize {
    if amplitudes < SERIAL_BELOW { 1 } else { asked.max(1) }
}

struct Barrier {
    members: usize,
    arrived: AtomicUsize,
    generation: AtomicUsize,
    broken: AtomicBool,
    verdict: AtomicU8,
}

impl Barrier {
    /// Waits for all members; the last to arrive runs `leader` before anyone goes on.
    fn wait(&self, leader: impl FnOnce()) -> Result<()> {
        let generation = self.generation.load(Ordering::Acquire);
        if self.arrived.fetch_add(1, Ordering::AcqRel) + 1 == self.members {
            leader();
            self.arrived.store(0, Ordering::Relaxed);
            self.generation.store(generation.wrapping_add(1), Ordering::Release);
        }
        let mut turns = 0u32;
        while self.generation.load(Ordering::Acquire) == generation {
            if self.broken.load(Ordering::Relaxed) {
                return Err(panicked());
            }
            turns += 1;
            if turns < 4096 {
                std::hint::spin_loop();
            } else {
                std::thread::yield_now();
            }
        }
        Ok(())
    }
}

/// The system refused to start another thread.
pub fn no_thread(workers: usize) -> Error {
    let message = format!("threads: the system cannot start so many ({workers}); ask for fewer");
    Error::Argument { argument: "threads", message }
}

fn panicked() -> Error {
    Error::Internal { message: "a worker panicked".into() }
}

/// One worker's view of the team.
pub struct Member<'a> {
    index: usize,
    barrier: &'a Barrier,
    control: &'a Control,
}

impl Member<'_> {
    /// This worker's share of `units`, contiguous and in order of the workers.
    pub fn share(&self, units: usize) -> Range<usize> {
        let cut = |worker: usize| (units as u128 * worker as u128 / self.barrier.members as u128) as usize;
        cut(self.index)..cut(self.index + 1)
    }

    /// Calls `work` on pieces of this worker's share, and gives up between two pieces if a stop at once was asked.
    ///
    /// # Errors
    /// [`Error::Abandoned`] after a second request to stop.
    pub fn each_piece(&self, units: usize, piece: usize, mut work: impl FnMut(Range<usize>)) -> Result<()> {
        let share = self.share(units);
        let mut start = share.start;
        while start < share.end {
            if self.control.request.load(Ordering::Relaxed) == STOP_AT_ONCE {
                self.barrier.broken.store(true, Ordering::Relaxed);
                return Err(Error::Abandoned);
            }
            let end = share.end.min(start + piece);
            work(start..end);
            start = end;
        }
        Ok(())
    }

    /// Ends a pass: waits for the others, and learns whether to go on.
    ///
    /// # Errors
    /// [`Error::Cancelled`] after a request to stop, [`Error::Abandoned`] after a second, [`Error::Internal`] where another
    /// worker panicked.
    pub fn pass_done(&self) -> Result<()> {
        let met = self.barrier.wait(|| {
            self.control.passes_done.fetch_add(1, Ordering::Relaxed);
            self.barrier.verdict.store(self.control.request.load(Ordering::Relaxed), Ordering::Relaxed);
        });
        if met.is_err() && self.control.request.load(Ordering::Relaxed) == STOP_AT_ONCE {
            return Err(Error::Abandoned);
        }
        met?;
        match self.barrier.verdict.load(Ordering::Relaxed) {
            CONTINUE => Ok(()),
            _ => Err(Error::Cancelled { passes_done: self.control.passes_done.load(Ordering::Relaxed) }),
        }
    }
}

/// Runs `body` once on each of `workers` workers, this thread among them, and waits for all.
///
/// # Errors
/// The gravest of the workers' errors: a bug before an abandoned pass before a stop after a pass.
pub fn run(workers: usize, control: &Control, body: impl Fn(&Member) -> Result<()> + Sync) -> Result<Run> {
    let barrier = Barrier {
        members: workers,
        arrived: AtomicUsize::new(0),
        generation: AtomicUsize::new(0),
        broken: AtomicBool::new(false),
        verdict: AtomicU8::new(CONTINUE),
    };
    let before = control.progress().0;
    let one = &|index: usize| {
        let member = Member { index, barrier: &barrier, control };
        catch_unwind(AssertUnwindSafe(|| body(&member))).unwrap_or_else(|_| {
            barrier.broken.store(true, Ordering::Relaxed);
            Err(panicked())
        })
    };
    let results = std::thread::scope(|scope| {
        let mut others = Vec::with_capacity(workers);
        for index in 1..workers {
            match std::thread::Builder::new().spawn_scoped(scope, move || one(index)) {
                Ok(worker) => others.push(worker),
                Err(_) => {
                    barrier.broken.store(true, Ordering::Relaxed);
                    others.into_iter().for_each(|worker| drop(worker.join()));
                    return vec![Err(no_thread(workers))];
                }
            }
        }
        let mut results = vec![one(0)];
        results.extend(others.into_iter().map(|other| other.join().unwrap_or_else(|_| Err(panicked()))));
        results
    });
    let gravity = |error: &Error| match error {
        Error::Cancelled { .. } => 0,
        Error::Abandoned => 1,
        _ => 2,
    };
    match results.into_iter().filter_map(Result::err).max_by_key(gravity) {
        Some(error) => Err(error),
        None => Ok(Run { passes: control.progress().0 - before, workers }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_cover_all_units_once_for_any_team() {
        for workers in [1, 2, 3, 5, 7] {
            let seen: Vec<AtomicUsize> = (0..100).map(|_| AtomicUsize::new(0)).collect();
            let control = Control::default();
            let run = run(workers, &control, |member| {
                member.each_piece(100, 9, |piece| {
                    piece.for_each(|unit| seen[unit].store(1 + seen[unit].load(Ordering::Relaxed), Ordering::Relaxed))
                })?;
                member.pass_done()
            });
            assert_eq!(run, Ok(Run { passes: 1, workers }));
            assert!(seen.iter().all(|count| count.load(Ordering::Relaxed) == 1));
        }
    }

    #[test]
    fn a_stop_is_heard_after_the_pass_and_a_second_one_inside() {
        let control = Control::default();
        control.request_stop();
        let stopped = run(2, &control, |member| {
            loop {
                member.pass_done()?;
            }
        });
        assert_eq!(stopped, Err(Error::Cancelled { passes_done: 1 }));
        control.request_stop();
        let abandoned = run(2, &control, |member| member.each_piece(10, 1, |_| ()));
        assert_eq!(abandoned, Err(Error::Abandoned));
    }

    #[test]
    fn a_panic_in_one_worker_ends_the_run_with_an_error() {
        let outcome = run(3, &Control::default(), |member| {
            assert!(member.share(3).start != 1, "meant");
            member.pass_done()
        });
        assert!(matches!(outcome, Err(Error::Internal { .. })));
    }
}
