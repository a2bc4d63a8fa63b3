//! Bars on standard error that show how far a long job is; invisible where that is no terminal.

use indicatif::{ProgressBar, ProgressStyle};

/// A bar up to `whole`; `done` says what becomes of the parts: `40 % played, 3s to go`.
pub(crate) fn bar(whole: u64, done: &str) -> ProgressBar {
    let bar = ProgressBar::new(whole);
    let template = format!("  {{wide_bar}} {{percent}} % {done}, {{eta}} to go");
    let style = ProgressStyle::with_template(&template);
    bar.set_style(style.expect("the template is well formed"));
    bar
}
