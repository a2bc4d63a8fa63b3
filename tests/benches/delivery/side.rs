//! A served process, and connections to it.

use std::{
    io::{BufRead, BufReader},
    process::{Child, Command, Stdio},
};

use crate::bare::WRITING;
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
    folder: tempfile::TempDir,
}

/// Time that the threads of a process have run, s.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Ran {
    /// The thread that writes to the store.
    pub(crate) writing: f64,
    /// All the others.
    pub(crate) serving: f64,
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
            folder,
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

    /// How long its threads have run.
    pub(crate) fn ran(&self) -> Ran {
        let mut ran = Ran::default();
        let threads = format!("/proc/{}/task", self.process.id());
        for thread in std::fs::read_dir(threads).expect("it runs, on Linux") {
            let read = |file| {
                let path = thread.as_ref().expect("a thread").path().join(file);
                std::fs::read_to_string(path).unwrap_or_default()
            };
            let ns = read("schedstat");
            let ns = ns.split_whitespace().next().and_then(|ns| ns.parse().ok());
            // A thread may have ended meanwhile.
            let seconds = ns.unwrap_or(0.0) * 1e-9;
            match read("comm").trim() {
                WRITING => ran.writing += seconds,
                _ => ran.serving += seconds,
            }
        }
        ran
    }

    /// Bytes that the daemon's journal takes for an event, on average over what it holds.
    pub(crate) fn journal_bytes(&self) -> f64 {
        let path = self.folder.path().join("ratewright.sqlite3");
        let db = rusqlite::Connection::open(path).expect("the daemon's database");
        let all = "SELECT CAST(sum(length(events)) AS REAL) / (max(seq) - (SELECT min(seq) FROM journal)) \
                   FROM journal WHERE seq > (SELECT min(seq) FROM journal)";
        db.query_row(all, [], |row| row.get(0))
            .expect("a journal of several rows")
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
