//! The audio thread's functions.

use std::ffi::c_int;

use ratewright_handle::Reader;

use crate::RwBlock;

/// Frees a reader.
///
/// # Safety
/// `reader` is null or of `rw_handle_new`, not freed before and not in use.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_free(reader: *mut Reader) {
    if !reader.is_null() {
        // SAFETY: it was made by a box, and is handed back once.
        drop(unsafe { Box::from_raw(reader) });
    }
}

/// What to run next.
///
/// # Safety
/// `reader` is null or of `rw_handle_new`, in use by this thread alone.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_next_block(reader: *mut Reader, sink_sample: u64) -> RwBlock {
    // SAFETY: by this function's own contract; the same below.
    match unsafe { reader.as_mut() } {
        Some(reader) => reader.next_block(sink_sample).into(),
        None => RwBlock::default(),
    }
}

/// Whether the running setting is past its expiry.
///
/// # Safety
/// As [`rw_reader_next_block`].
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_is_expired(reader: *const Reader) -> c_int {
    unsafe { reader.as_ref() }
        .is_some_and(Reader::is_expired)
        .into()
}

/// The setting that is running.
///
/// # Safety
/// As [`rw_reader_next_block`]; `epoch` and `number` are null or may be written.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_setting(
    reader: *const Reader,
    epoch: *mut u64,
    number: *mut u64,
) -> c_int {
    let Some(setting) = unsafe { reader.as_ref() }.and_then(Reader::setting) else {
        return 0;
    };
    let Some((epoch, number)) = (unsafe { epoch.as_mut().zip(number.as_mut()) }) else {
        return 0;
    };
    (*epoch, *number) = (setting.epoch, setting.number);
    1
}

/// Says that the sink counts anew.
///
/// # Safety
/// As [`rw_reader_next_block`].
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_restart(reader: *mut Reader, counter_epoch: u64) {
    if let Some(reader) = unsafe { reader.as_mut() } {
        reader.restart(counter_epoch);
    }
}

/// Leaves word of how full the buffer is.
///
/// # Safety
/// As [`rw_reader_next_block`].
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_reader_set_level(reader: *mut Reader, level_samples: f64) {
    if let Some(reader) = unsafe { reader.as_mut() } {
        reader.set_level(level_samples);
    }
}
