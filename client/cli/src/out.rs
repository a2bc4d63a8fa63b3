//! Standard output. A reader that has seen enough (`| head`) is no failure.

use std::{
    fmt::Arguments,
    io::{self, ErrorKind, Write as _},
};

use crate::failure::Failure;

/// Prints without a line end; use [`say!`] for lines.
pub(crate) fn text(text: Arguments<'_>) -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    match out.write_fmt(text).and_then(|()| out.flush()) {
        Ok(()) => Ok(()),
        Err(fault) if fault.kind() == ErrorKind::BrokenPipe => Err(Failure::ReaderGone),
        Err(fault) => Err(Failure::Failed(format!(
            "standard output cannot be written: {fault}"
        ))),
    }
}

/// Prints a line, as `println!` does, but gives the failure to its caller.
macro_rules! say {
    ($($part:tt)*) => {
        $crate::out::text(format_args!("{}\n", format_args!($($part)*)))
    };
}
pub(crate) use say;
