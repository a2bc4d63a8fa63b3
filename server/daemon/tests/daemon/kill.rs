//! The story of a power cut, told twelve times: the daemon is killed in the middle of its work
//! and started again from its store. Whatever it had promised before must still be so.

use std::{
    collections::BTreeMap,
    io::{BufRead, BufReader},
    net::SocketAddr,
    path::{Path, PathBuf},
    process::{Child, Command, Stdio},
    time::Duration,
};

use ratewright_proto::v1;
use tempfile::TempDir;
use tokio::time::sleep;

use crate::facility::{Clients, crossing, drift};

const ROUNDS: u64 = 12;

/// The real daemon, as a process of its own.
struct Process {
    child: Child,
    grpc: SocketAddr,
}

impl Process {
    fn start(config: &Path) -> Self {
        let mut command = Command::new(env!("CARGO_BIN_EXE_ratewrightd"));
        command
            .arg("run")
            .arg(config)
            .env_remove("RUST_LOG")
            .stderr(Stdio::piped());
        let mut child = command.spawn().unwrap();
        let mut log = BufReader::new(child.stderr.take().unwrap());
        let grpc = serving_address(&mut log);
        // The pipe must not fill up.
        std::thread::spawn(move || std::io::copy(&mut log, &mut std::io::sink()));
        Self { child, grpc }
    }

    fn kill(mut self) {
        // On Unix this is SIGKILL: nothing in the process gets a chance to tidy up.
        self.child.kill().unwrap();
        self.child.wait().unwrap();
    }
}

fn serving_address(log: &mut impl BufRead) -> SocketAddr {
    let mut seen = String::new();
    while log.read_line(&mut seen).unwrap() > 0 {
        if let Some((_, rest)) = seen.rsplit_once("serving grpc=") {
            return rest.split_whitespace().next().unwrap().parse().unwrap();
        }
    }
    panic!("the daemon did not come up:\n{seen}");
}

/// What the daemon has promised so far, over all its lives.
#[derive(Default)]
struct Promised {
    /// Settings that were heard of, by name.
    settings: BTreeMap<String, v1::Setting>,
    /// Reference time in seconds of the newest reading with a durable receipt.
    reading_s: i64,
}

impl Promised {
    fn heard(&mut self, setting: v1::Setting) {
        if let Some(before) = self.settings.insert(setting.name.clone(), setting.clone()) {
            assert_eq!(before, setting, "one name has told two settings");
        }
    }
}

/// Works until the daemon is gone: one after the other a batch of readings, a declaration that
/// makes a setting, and whatever the watch has heard.
async fn work(grpc: SocketAddr, promised: &mut Promised, round: u64) {
    let mut clients = Clients::connect(grpc).await;
    if round == 0 {
        clients.declare_pair().await;
    }
    let watch = clients
        .ratios
        .watch_settings(v1::WatchSettingsRequest::default())
        .await;
    let Ok(watch) = watch else { return };
    let mut watch = watch.into_inner();
    let mut report = clients.report().await;
    for step in 0.. {
        let seconds = promised.reading_s + 1..promised.reading_s + 21;
        let readings = seconds.map(|second| drift("desk", 5e-6, second)).collect();
        let request = v1::ReportReadingsRequest {
            batch: step,
            readings,
            receipt: 0,
        };
        if report.batches.send(request).await.is_err() {
            return;
        }
        let Ok(Some(receipt)) = report.receipts.message().await else {
            return;
        };
        assert!(receipt.accepted + receipt.refusals.len() as u64 == 20);
        promised.reading_s += 20;

        let max_l = 200 + (round * 1_000 + step) % 800;
        let crossing = Some(v1::Crossing {
            max_l,
            ..crossing("desk-to-stage", "desk", "stage")
        });
        let update = v1::UpdateCrossingRequest {
            crossing,
            update_mask: None,
        };
        let Ok(updated) = clients.crossings.update_crossing(update).await else {
            return;
        };
        promised.heard(updated.into_inner().status.unwrap().setting.unwrap());
        let Ok(Some(heard)) = watch.message().await else {
            return;
        };
        promised.heard(heard.setting.unwrap());
    }
}

/// Whatever was promised is still so.
async fn check(grpc: SocketAddr, promised: &Promised) {
    let mut clients = Clients::connect(grpc).await;
    let clock = v1::GetClockRequest {
        name: "clocks/desk".into(),
    };
    let clock = clients.clocks.get_clock(clock).await.unwrap().into_inner();
    let newest_ns = clock.estimate.unwrap().last_reading_ns;
    assert!(
        newest_ns >= promised.reading_s * 1_000_000_000,
        "a durable reading was lost"
    );

    let mut kept = BTreeMap::new();
    let mut page_token = String::new();
    loop {
        let parent = "crossings/desk-to-stage".into();
        let request = v1::ListSettingsRequest {
            parent,
            page_size: 1_000,
            page_token,
        };
        let page = clients
            .ratios
            .list_settings(request)
            .await
            .unwrap()
            .into_inner();
        kept.extend(
            page.settings
                .into_iter()
                .map(|setting| (setting.name.clone(), setting)),
        );
        page_token = page.next_page_token;
        if page_token.is_empty() {
            break;
        }
    }
    for (name, setting) in &promised.settings {
        assert_eq!(kept.get(name), Some(setting), "{name} was lost or changed");
    }
    let numbers: Vec<u64> = kept.values().map(|setting| setting.number).collect();
    let newest = numbers.iter().copied().max().unwrap();
    assert_eq!(
        newest,
        numbers.len() as u64,
        "numbers have neither gaps nor twins"
    );
}

fn configuration(folder: &TempDir) -> PathBuf {
    let path = folder.path().join("ratewrightd.toml");
    let store = folder.path().join("store");
    let text = format!(
        "[listen]\ngrpc = \"127.0.0.1:0\"\npeople = \"127.0.0.1:0\"\n[store]\nfolder = {store:?}\n"
    );
    std::fs::write(&path, text).unwrap();
    path
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn killed_again_and_again_it_keeps_every_promise() {
    let folder = tempfile::tempdir().unwrap();
    let config = configuration(&folder);
    let mut promised = Promised::default();
    for round in 0..ROUNDS {
        let process = Process::start(&config);
        if round > 0 {
            check(process.grpc, &promised).await;
        }
        let grpc = process.grpc;
        let killer = tokio::spawn(async move {
            // Another moment of its work each time; no two rounds are alike anyway.
            sleep(Duration::from_millis(120 + 37 * (round % 5))).await;
            process.kill();
        });
        work(grpc, &mut promised, round).await;
        killer.await.unwrap();
    }
    let process = Process::start(&config);
    check(process.grpc, &promised).await;
    process.kill();
    assert!(
        promised.settings.len() as u64 > ROUNDS,
        "the rounds were too short to show anything"
    );
}

#[test]
fn a_faulty_configuration_ends_with_78_and_every_fault() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("wrong.toml");
    std::fs::write(&path, "[listen]\ngrpc = 5\n[shutdown]\ngrace_s = -1\n").unwrap();
    for subcommand in ["run", "check"] {
        let mut command = Command::new(env!("CARGO_BIN_EXE_ratewrightd"));
        let output = command.arg(subcommand).arg(&path).output().unwrap();
        assert_eq!(output.status.code(), Some(78));
        let told = String::from_utf8(output.stderr).unwrap();
        assert!(
            told.contains("listen.grpc") && told.contains("shutdown.grace_s"),
            "{told}"
        );
    }
}

#[test]
fn sigterm_ends_with_0_after_a_drain() {
    let folder = tempfile::tempdir().unwrap();
    let mut process = Process::start(&configuration(&folder));
    let pid = process.child.id().to_string();
    assert!(
        Command::new("kill")
            .args(["-TERM", &pid])
            .status()
            .unwrap()
            .success()
    );
    assert_eq!(process.child.wait().unwrap().code(), Some(0));
}
