//! The one place where wire types and domain types meet.
//!
//! Into the domain everything is checked, and a violation names the path of the field as it was
//! sent. Out of the domain nothing can fail.

pub(crate) mod clock;
pub(crate) mod crossing;
pub(crate) mod engine;
pub(crate) mod hand;
pub(crate) mod names;
pub(crate) mod plan;
pub(crate) mod rate;
pub(crate) mod reading;
pub(crate) mod report;
pub(crate) mod setting;
