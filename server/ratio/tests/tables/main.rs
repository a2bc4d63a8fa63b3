//! Every check table in `tests/data`, whose sources `tests/data/README.md` names.
//!
//! Rows that lie outside what the crate serves are counted and printed with the reason:
//! `cargo test -p ratewright-ratio --test tables -- --nocapture`.
#![allow(clippy::print_stdout, reason = "the skips are to be seen")]

mod filters;
mod frames;
mod nearest;
mod rates;
mod rows;
mod simplest;
