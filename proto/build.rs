//! Compiles the contract without a system protoc: protox parses it, and the same descriptor
//! set serves reflection.
#![allow(
    clippy::disallowed_methods,
    reason = "a build script reads its environment and writes its output"
)]

use prost::Message as _;
use std::{env, error::Error, fs, path::PathBuf};

const FILES: [&str; 5] = [
    "ratewright/v1/rate.proto",
    "ratewright/v1/clock.proto",
    "ratewright/v1/crossing.proto",
    "ratewright/v1/reading.proto",
    "ratewright/v1/ratio.proto",
];

fn main() -> Result<(), Box<dyn Error>> {
    for file in FILES {
        println!("cargo:rerun-if-changed={file}");
    }
    let descriptors = protox::compile(FILES, ["."])?;
    let out = PathBuf::from(env::var("OUT_DIR")?);
    fs::write(out.join("ratewright_v1.bin"), descriptors.encode_to_vec())?;
    tonic_prost_build::configure().compile_fds(descriptors)?;
    Ok(())
}
