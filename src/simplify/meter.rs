//! The allowance of steps of a running simplification.
//!
//! Budgets are counts of elementary steps, never times, so that the same sheet gives the same form on every machine. A
//! simplification runs on one thread; its allowance lives there, because nearly every operation on polynomials spends
//! from it.

use std::cell::Cell;

thread_local! {
    static LEFT: Cell<u64> = const { Cell::new(u64::MAX) };
}

/// The allowance is used up, or a polynomial outgrew its bounds.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Exhausted;

/// A result that the allowance may prevent.
pub(super) type Step<T> = Result<T, Exhausted>;

/// Takes `steps` from the allowance.
pub(super) fn spend(steps: usize) -> Step<()> {
    LEFT.with(|left| match left.get().checked_sub(steps as u64) {
        Some(rest) => {
            left.set(rest);
            Ok(())
        }
        None => {
            left.set(0);
            Err(Exhausted)
        }
    })
}

/// Runs `work` with at most `steps` of the allowance; what it uses is taken from the surrounding allowance too.
pub(super) fn with_allowance<T>(steps: u64, work: impl FnOnce() -> T) -> T {
    let outer = LEFT.with(Cell::get);
    let granted = steps.min(outer);
    LEFT.with(|left| left.set(granted));
    let result = work();
    LEFT.with(|left| left.set(outer - (granted - left.get())));
    result
}
