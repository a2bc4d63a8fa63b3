//! Followers in a storm: a daemon that is drained and killed, a network that delays, cuts, swallows
//! and falls silent, and now and then somebody at the other end who lies.
//!
//! - `process`: the real daemon as a process of its own.
//! - `proxy`: the network.
//! - `liar`: answers as a daemon would, with forged settings and old ones.
//! - `follower`: keeps account of what it was handed.
//! - `storm`: all of them together.

pub mod follower;
pub mod liar;
pub mod process;
pub mod proxy;
pub mod storm;
