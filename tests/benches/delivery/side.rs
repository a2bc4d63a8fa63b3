//! A served process, and connections to it.

use std::{
    io::{BufRead, BufReader},
    process::{Child, Command, Stdio},
};

use ratewright_proto::v1::{
    ratio_service_client::RatioServiceClient, reading_service_client::ReadingServiceClient,
};
use tonic::transport::{Channel, Endpoint};

/// Unread small frames of a connection are charged to half of its window.
const CONNECTION_WINDOW: u32 = 32 << 20;

/// What is served.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Kind {
    Bare,
    Ratewright,
}

/// A process that serves, ended when dropped.
pub(crate) struct Side {
    pub(crate) kind: Kind,
    pub(crate) address: String,
    process: Child,
    _folder: tempfile::TempDir,
}

impl Side {
    pub(crate) async fn start(kind: Kind) -> Self {
        let folder = tempfile::tempdir().expect("a folder for the store");
        let mode = match kind {
            Kind::Bare => "serve-bare",
            Kind::Ratewright => "serve-ratewright",
        };
        let mut process = Command::new(std::env::current_exe().expect("this program has a path"))
            .args([mode, folder.path().to_str().expect("a path of letters")])
            .stdout(Stdio::piped())
            .spawn()
            .expect("this program can be started again");
        let said = process.stdout.take().expect("it is piped");
        let mut address = String::new();
        BufReader::new(said)
            .read_line(&mut address)
            .expect("it says where it serves");
        Self {
            kind,
            address: address.trim().to_owned(),
            process,
            _folder: folder,
        }
    }

    pub(crate) async fn connect(&self) -> Channel {
        let endpoint = Endpoint::from_shared(format!("http://{}", self.address));
        endpoint
            .expect("an address")
            .initial_connection_window_size(CONNECTION_WINDOW)
            .tcp_nodelay(true)
            .connect()
            .await
            .expect("it serves")
    }

    pub(crate) async fn ratios(&self) -> RatioServiceClient<Channel> {
        RatioServiceClient::new(self.connect().await)
    }

    pub(crate) async fn readings(&self) -> ReadingServiceClient<Channel> {
        ReadingServiceClient::new(self.connect().await)
    }

    /// Memory of the process that is in use, bytes.
    pub(crate) fn resident_bytes(&self) -> f64 {
        let path = format!("/proc/{}/status", self.process.id());
        let status = std::fs::read_to_string(path).expect("it runs, on Linux");
        let line = status.lines().find(|line| line.starts_with("VmRSS:"));
        let kib = line.and_then(|line| line.split_whitespace().nth(1));
        kib.and_then(|kib| kib.parse::<f64>().ok())
            .expect("a number of KiB")
            * 1024.0
    }
}

impl Drop for Side {
    fn drop(&mut self) {
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}
