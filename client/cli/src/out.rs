//! Standard output. A reader that has seen enough (`| head`) is no failure.

use std::{
    fmt::Arguments,
    io::{self, ErrorKind, Write as _},
};

use crate::failure::Failure;
use crate::terminal;

/// Prints without a line end; use [`say!`] for lines.
pub(crate) fn text(text: Arguments<'_>) -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    match out.write_fmt(text).and_then(|()| out.flush()) {
        Ok(()) => Ok(()),
        Err(fault) => Err(failure(&fault)),
    }
}

/// Prints lines for people: on a terminal, folded to its width.
pub(crate) fn prose(lines: &str) -> Result<(), Failure> {
    match terminal::width() {
        Some(width) => text(format_args!("{}", terminal::folded(lines, width))),
        None => text(format_args!("{lines}")),
    }
}

/// What it means that standard output could not be written.
pub(crate) fn failure(fault: &io::Error) -> Failure {
    match fault.kind() {
        ErrorKind::BrokenPipe => Failure::ReaderGone,
        _ => Failure::Failed(format!("standard output cannot be written: {fault}")),
    }
}

/// Prints a line, as `println!` does, but gives the failure to its caller.
macro_rules! say {
    ($($part:tt)*) => {
        $crate::out::text(format_args!("{}\n", format_args!($($part)*)))
    };
}
pub(crate) use say;
