//! What an input takes: processor time, and the most memory that was allocated at once.

use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Mutex, PoisonError};

/// The allocator of the system, counted.
pub struct Counting;

static NOW: AtomicUsize = AtomicUsize::new(0);
static PEAK: AtomicUsize = AtomicUsize::new(0);

fn grow(size: usize) {
    PEAK.fetch_max(NOW.fetch_add(size, Ordering::Relaxed) + size, Ordering::Relaxed);
}

// SAFETY: every request goes to the system's allocator unchanged; counting touches no memory of theirs.
#[allow(unsafe_code)]
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        grow(layout.size());
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        NOW.fetch_sub(layout.size(), Ordering::Relaxed);
        unsafe { System.dealloc(pointer, layout) }
    }
}

/// Most bytes allocated at once in this process so far.
pub fn peak_bytes() -> usize {
    PEAK.load(Ordering::Relaxed)
}

/// Most memory that any input may need.
pub const MOST_BYTES: usize = 256 << 20;

/// Seconds of processor time that reading one input may take.
pub const MOST_SECONDS: f64 = 1.0;

/// Held while an input is measured, so that tests of the same process do not count for each other.
static MEASURING: Mutex<()> = Mutex::new(());

/// Processor time of all threads of this process (reading a sheet has a thread of its own), from the account that Linux
/// keeps in hundredths of a second; `None` elsewhere. Unlike the time of day it does not grow while other programs have
/// the processor.
pub fn process_seconds() -> Option<f64> {
    let text = std::fs::read_to_string("/proc/self/stat").ok()?;
    // The name of the program, in brackets, may hold spaces; user and system time are the 12th and 13th field after it.
    let fields: Vec<&str> = text.rsplit_once(')')?.1.split_whitespace().collect();
    let ticks = |field: &&str| field.parse::<f64>().ok();
    Some((ticks(fields.get(11)?)? + ticks(fields.get(12)?)?) / 100.0)
}

/// Asserts that `work` takes no more than `seconds` of processor time, and that memory stays within its bound.
pub fn bounded<T>(what: &dyn Fn() -> String, seconds: f64, work: impl FnOnce() -> T) -> T {
    let _alone = MEASURING.lock().unwrap_or_else(PoisonError::into_inner);
    let before = process_seconds();
    let result = work();
    if let (Some(before), Some(after)) = (before, process_seconds()) {
        assert!(after - before <= seconds, "{:.2} s for {}", after - before, what());
    }
    assert!(peak_bytes() <= MOST_BYTES, "{} bytes at once after {}", peak_bytes(), what());
    result
}
