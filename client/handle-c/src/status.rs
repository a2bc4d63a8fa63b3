//! What calls return.

use std::ffi::{CStr, c_char, c_int};

/// `rw_status`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(C)]
pub enum Status {
    /// Done.
    Ok = 0,
    /// A pointer is null.
    Null = 1,
    /// What to run makes no sense.
    BadRun = 2,
    /// A swing that the pair cannot keep.
    BadSwing = 3,
    /// Not newer than what was armed before.
    NotNewer = 4,
    /// A timescale that makes no sense.
    BadTimescale = 5,
    /// A trim that cannot be made.
    BadTrim = 6,
}

impl From<Result<(), Status>> for Status {
    fn from(done: Result<(), Status>) -> Self {
        done.err().unwrap_or(Self::Ok)
    }
}

/// A status in words.
#[unsafe(no_mangle)]
pub extern "C" fn rw_status_text(status: c_int) -> *const c_char {
    let text: &CStr = match status {
        0 => c"done",
        1 => c"a pointer is null",
        2 => {
            c"run: accepted are RW_SINGLE with low, RW_CADENCE and RW_LAZY with low < wanted < high, RW_STEPPING with phases of at least wanted; all parts at least 1"
        }
        3 => c"run.swing_samples: accepted is at least the error bound of the pair",
        4 => c"epoch, number: accepted is what is newer than all that were armed before",
        5 => {
            c"timescale: accepted are rate_hz above 0, deviation_ns of at least 0, and a counter_epoch that never falls"
        }
        6 => {
            c"ppb: accepted is what the two ratios or the advances of the newest setting can make; a single ratio has none"
        }
        _ => c"no status of this library",
    };
    text.as_ptr()
}
