//! Stopping a calculation: Ctrl-C, the time limit, a reader of the output that went away.
//!
//! One [`Stop`] is shared by the interpreter, which asks it every few operations, and by every native loop that may
//! run long. A script cannot catch a stop.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::time::{Duration, Instant};

use rhai::{Dynamic, EvalAltResult, Position};

use super::ScriptResult;

/// Why a calculation was told to end.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Halt {
    /// The person pressed Ctrl-C.
    Interrupted,
    /// The time limit passed.
    TimeUp,
    /// The memory limit was reached.
    MemoryFull,
    /// Nobody reads the output any more.
    OutputClosed,
}

/// The shared signal to stop; a clone is the same signal.
#[derive(Debug, Clone)]
pub struct Stop(Arc<Signal>);

#[derive(Debug)]
struct Signal {
    interrupted: Arc<AtomicBool>,
    output_closed: AtomicBool,
    memory_full: AtomicBool,
    start: Instant,
    /// Nanoseconds after `start`; [`NEVER`] without a limit.
    deadline: AtomicU64,
}

const NEVER: u64 = u64::MAX;

impl Default for Stop {
    fn default() -> Self {
        Self(Arc::new(Signal {
            interrupted: Arc::default(),
            output_closed: AtomicBool::new(false),
            memory_full: AtomicBool::new(false),
            start: Instant::now(),
            deadline: AtomicU64::new(NEVER),
        }))
    }
}

impl Stop {
    /// The flag a signal handler sets.
    #[must_use]
    pub fn flag(&self) -> Arc<AtomicBool> {
        Arc::clone(&self.0.interrupted)
    }

    /// Whether to stop, and why. Cheap enough for the inner loop of a sweep.
    #[must_use]
    pub fn requested(&self) -> Option<Halt> {
        if self.0.memory_full.load(Ordering::Relaxed) {
            return Some(Halt::MemoryFull);
        }
        if self.0.interrupted.load(Ordering::Relaxed) {
            return Some(Halt::Interrupted);
        }
        if self.0.output_closed.load(Ordering::Relaxed) {
            return Some(Halt::OutputClosed);
        }
        let deadline = self.0.deadline.load(Ordering::Relaxed);
        (deadline != NEVER && self.elapsed() >= deadline).then_some(Halt::TimeUp)
    }

    /// For native functions: `stop.check()?`.
    ///
    /// # Errors
    ///
    /// Returns the uncatchable termination error when a stop was requested.
    pub fn check(&self) -> ScriptResult<()> {
        match self.requested() {
            None => Ok(()),
            Some(halt) => Err(Box::new(EvalAltResult::ErrorTerminated(Dynamic::from(halt), Position::NONE))),
        }
    }

    /// Ends the evaluation because the memory limit was reached; who watches the memory calls it.
    pub fn fill_memory(&self) {
        self.0.memory_full.store(true, Ordering::Relaxed);
        // Native loops listen to this one.
        self.0.interrupted.store(true, Ordering::Relaxed);
    }

    /// Starts a fresh evaluation: an old Ctrl-C is forgotten and the clock begins.
    pub(super) fn arm(&self, limit: Option<Duration>) {
        self.0.interrupted.store(false, Ordering::Relaxed);
        self.0.memory_full.store(false, Ordering::Relaxed);
        let nanoseconds = |limit: Duration| u64::try_from(limit.as_nanos()).unwrap_or(NEVER);
        let deadline = limit.map_or(NEVER, |limit| self.elapsed().saturating_add(nanoseconds(limit)));
        self.0.deadline.store(deadline, Ordering::Relaxed);
    }

    pub(super) fn close_output(&self) {
        self.0.output_closed.store(true, Ordering::Relaxed);
    }

    fn elapsed(&self) -> u64 {
        u64::try_from(self.0.start.elapsed().as_nanos()).unwrap_or(NEVER - 1)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_deadline_passes() {
        let stop = Stop::default();
        stop.arm(Some(Duration::from_secs(3600)));
        assert_eq!(stop.requested(), None);
        stop.arm(Some(Duration::ZERO));
        assert_eq!(stop.requested(), Some(Halt::TimeUp));
        stop.arm(None);
        assert_eq!(stop.requested(), None);
    }

    #[test]
    fn an_old_interrupt_is_forgotten_by_the_next_evaluation() {
        let stop = Stop::default();
        stop.flag().store(true, Ordering::Relaxed);
        assert!(stop.check().is_err());
        stop.arm(None);
        assert!(stop.check().is_ok());
    }
}
