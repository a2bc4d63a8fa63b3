//! The real daemon as a process of its own.

use std::io::{self, BufRead, BufReader};
use std::net::SocketAddr;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};

use crate::binary;

/// A daemon that serves.
#[derive(Debug)]
pub struct Process {
    child: Child,
    grpc: SocketAddr,
}

impl Process {
    /// Starts it with this configuration and waits until it serves.
    ///
    /// # Errors
    /// What it said, if it did not come up.
    pub fn start(config: &Path) -> io::Result<Self> {
        let mut child = Command::new(binary("ratewright-server", "ratewrightd"))
            .arg("run")
            .arg(config)
            .env_remove("RUST_LOG")
            .stderr(Stdio::piped())
            .spawn()?;
        let said = child
            .stderr
            .take()
            .ok_or_else(|| io::Error::other("no log"))?;
        let mut log = BufReader::new(said);
        let grpc = serving_address(&mut log)?;
        // The pipe must not fill up.
        std::thread::spawn(move || io::copy(&mut log, &mut io::sink()));
        Ok(Self { child, grpc })
    }

    /// Where it serves gRPC.
    pub fn grpc(&self) -> SocketAddr {
        self.grpc
    }

    /// Memory that it occupies, KiB.
    ///
    /// # Errors
    /// If the system does not tell.
    pub fn resident_kib(&self) -> io::Result<u64> {
        let status = PathBuf::from(format!("/proc/{}/status", self.child.id()));
        let text = std::fs::read_to_string(status)?;
        let line = text.lines().find_map(|line| line.strip_prefix("VmRSS:"));
        let number = line.and_then(|rest| rest.split_whitespace().next()?.parse().ok());
        number.ok_or_else(|| io::Error::other("no VmRSS"))
    }

    /// Has it drain, and waits until it is gone.
    ///
    /// # Errors
    /// If it cannot be told, or did not end well.
    pub fn drain(mut self) -> io::Result<()> {
        let pid = self.child.id().to_string();
        Command::new("kill").args(["-TERM", &pid]).status()?;
        let status = self.child.wait()?;
        if status.success() {
            return Ok(());
        }
        Err(io::Error::other(format!("the daemon ended with {status}")))
    }

    /// Ends it at once: nothing in it gets a chance to tidy up.
    ///
    /// # Errors
    /// If the system refuses.
    pub fn kill(mut self) -> io::Result<()> {
        self.child.kill()?;
        self.child.wait().map(|_| ())
    }
}

impl Drop for Process {
    fn drop(&mut self) {
        // It may be gone already; then both say so, which is of no interest.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

fn serving_address(log: &mut impl BufRead) -> io::Result<SocketAddr> {
    let mut seen = String::new();
    while log.read_line(&mut seen)? > 0 {
        let rest = seen.rsplit_once("serving grpc=").map(|(_, rest)| rest);
        let word = rest.and_then(|rest| rest.split_whitespace().next());
        if let Some(address) = word.and_then(|word| word.parse().ok()) {
            return Ok(address);
        }
    }
    Err(io::Error::other(format!(
        "the daemon did not come up:\n{seen}"
    )))
}
