//! The real-time handle for C: `include/ratewright_handle.h` is its documentation,
//! `example/follow.c` shows it, and `example/run.sh` compiles and runs that.
//!
//! Nothing is decided here: each function turns pointers and plain structures into the calls of
//! [`ratewright_handle`], and their errors into numbers.
#![allow(
    unsafe_code,
    reason = "C hands over pointers; each function states what it relies on, as the header does"
)]

mod plain;
mod reader;
mod status;
mod writer;

pub use plain::{RwApplied, RwBlock, RwLevel, RwRun, RwSetting, RwTimescale};
pub use reader::{
    rw_reader_free, rw_reader_is_expired, rw_reader_next_block, rw_reader_restart,
    rw_reader_set_level, rw_reader_setting,
};
pub use status::{Status, rw_status_text};
pub use writer::{
    rw_handle_new, rw_writer_arm, rw_writer_free, rw_writer_level, rw_writer_next_applied,
    rw_writer_set_timescale, rw_writer_trim,
};
