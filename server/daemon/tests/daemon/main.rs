//! The daemon as its callers see it: started in this process with a store of its own, and called
//! with nothing but what the contract generates.
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    reason = "these tests wait, start processes and open sockets"
)]

mod declarations;
mod facility;
mod hand;
mod kill;
mod life;
mod plan;
mod readings;
mod settings;
