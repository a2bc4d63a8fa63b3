//! The writer's functions.

use std::ffi::c_int;

use ratewright_handle::{ArmError, Reader, Timescale, Writer, handle};

use crate::{RwApplied, RwLevel, RwRun, RwSetting, RwTimescale, Status};

fn armed(error: ArmError) -> Status {
    match error {
        ArmError::NotNewer { .. } => Status::NotNewer,
        ArmError::Swing(_) | ArmError::SwingTooSmall { .. } => Status::BadSwing,
    }
}

/// Makes a pair.
///
/// # Safety
/// Each pointer is null or points to what its type says.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_handle_new(
    initial: *const RwRun,
    writer: *mut *mut Writer,
    reader: *mut *mut Reader,
) -> Status {
    // SAFETY: by this function's own contract; the same below.
    let places = unsafe { (initial.as_ref(), writer.as_mut(), reader.as_mut()) };
    let (Some(initial), Some(writer), Some(reader)) = places else {
        return Status::Null;
    };
    let made = initial
        .realised()
        .and_then(|realised| handle(&realised).map_err(armed));
    match made {
        Ok(pair) => {
            *writer = Box::into_raw(Box::new(pair.0));
            *reader = Box::into_raw(Box::new(pair.1));
            Status::Ok
        }
        Err(status) => status,
    }
}

/// Frees a writer.
///
/// # Safety
/// `writer` is null or of [`rw_handle_new`], not freed before and not in use.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_free(writer: *mut Writer) {
    if !writer.is_null() {
        // SAFETY: it was made by a box, and is handed back once.
        drop(unsafe { Box::from_raw(writer) });
    }
}

/// Arms a setting.
///
/// # Safety
/// `writer` is null or of [`rw_handle_new`], in use by this thread alone; `setting` is null or
/// points to one.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_arm(writer: *mut Writer, setting: *const RwSetting) -> Status {
    let Some((writer, setting)) = (unsafe { writer.as_mut().zip(setting.as_ref()) }) else {
        return Status::Null;
    };
    let arm = |cue| writer.arm(&cue).map_err(armed);
    setting.cue().and_then(arm).into()
}

/// Tells where the sink's count stands.
///
/// # Safety
/// As [`rw_writer_arm`].
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_set_timescale(
    writer: *mut Writer,
    timescale: *const RwTimescale,
) -> Status {
    let Some((writer, timescale)) = (unsafe { writer.as_mut().zip(timescale.as_ref()) }) else {
        return Status::Null;
    };
    let set = writer.set_timescale(&Timescale::from(timescale));
    set.map_err(|_| Status::BadTimescale).into()
}

/// Changes the running average.
///
/// # Safety
/// As [`rw_writer_arm`].
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_trim(writer: *mut Writer, ppb: i64) -> Status {
    match unsafe { writer.as_mut() } {
        Some(writer) => writer.trim(ppb).map_err(|_| Status::BadTrim).into(),
        None => Status::Null,
    }
}

/// The oldest report that was not taken.
///
/// # Safety
/// As [`rw_writer_arm`]; `applied` is null or may be written.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_next_applied(
    writer: *mut Writer,
    applied: *mut RwApplied,
) -> c_int {
    let Some((writer, place)) = (unsafe { writer.as_mut().zip(applied.as_mut()) }) else {
        return 0;
    };
    let report = writer.next_applied();
    report.map(|report| *place = report.into()).is_some().into()
}

/// The level that was left last.
///
/// # Safety
/// As [`rw_writer_arm`]; `level` is null or may be written.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn rw_writer_level(writer: *mut Writer, level: *mut RwLevel) -> c_int {
    let Some((writer, place)) = (unsafe { writer.as_mut().zip(level.as_mut()) }) else {
        return 0;
    };
    let left = writer.level();
    left.map(|left| *place = left.into()).is_some().into()
}
