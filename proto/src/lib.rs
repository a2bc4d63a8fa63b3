//! The wire contract, package `ratewright.v1`, and nothing else.
//!
//! Types here are what travels. The daemon and the client each convert them once, at their
//! edge, into types that cannot hold a wrong value.

/// Messages, clients and servers of `ratewright.v1`.
#[allow(
    missing_docs,
    clippy::all,
    clippy::allow_attributes_without_reason,
    reason = "generated from the .proto files, which carry the documentation"
)]
pub mod v1 {
    tonic::include_proto!("ratewright.v1");
}

/// The serialized `FileDescriptorSet` of the contract, for server reflection.
pub const DESCRIPTORS: &[u8] = include_bytes!(concat!(env!("OUT_DIR"), "/ratewright_v1.bin"));
