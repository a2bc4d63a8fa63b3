//! `ratewrightd`: the daemon's command line.
//!
//! Exit codes: 0 after a clean drain, 69 if an address cannot be served, 70 if the program itself
//! is at fault, 74 if the store fails, 78 if the configuration is at fault.
#![allow(
    clippy::print_stderr,
    clippy::print_stdout,
    reason = "this is a command: what it has to say before the log begins goes to the terminal"
)]

use std::{
    io::IsTerminal as _,
    path::{Path, PathBuf},
    process::ExitCode,
};

use clap::{CommandFactory as _, Parser, Subcommand};
use ratewright_server::{
    Daemon, Failed, Opening, RecoverFault, StartFault,
    config::{self, Config, LogFormat},
    sample,
};
use tokio::signal::unix::{Signal, SignalKind, signal};
use tracing_subscriber::EnvFilter;

const EX_UNAVAILABLE: u8 = 69;
const EX_SOFTWARE: u8 = 70;
const EX_IOERR: u8 = 74;
const EX_CONFIG: u8 = 78;

/// Keeps the sample rates of a facility's crossings right.
///
/// Exit status: 0 after a clean end; 69 an address cannot be served; 70 the program is at fault; 74 the store
/// fails; 78 the configuration is at fault.
#[derive(Parser)]
#[command(name = "ratewrightd", version)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Serve until told to stop (SIGTERM or SIGINT); read the configuration's declarations again on
    /// SIGHUP.
    Run {
        /// Configuration file (TOML); without one, every default.
        config: Option<PathBuf>,
        /// Begin a new epoch of setting numbers: once, after the store was lost or restored from
        /// a backup, or to leave behind the state of another engine version.
        #[arg(long)]
        new_epoch: bool,
    },
    /// Serve, and play an invented facility against the daemon.
    Sample {
        /// House seconds for a real second.
        #[arg(long, default_value_t = 1.0, value_parser = pace)]
        pace: f64,
        /// Folder of the store; without one, a folder that is deleted at the end.
        #[arg(long)]
        store: Option<PathBuf>,
    },
    /// Check a configuration file and list every fault.
    Check {
        /// Configuration file (TOML).
        config: PathBuf,
    },
    /// Write the man pages, one for each command, into a folder.
    Manual {
        /// The folder; it is made if it is not there, such as ~/.local/share/man/man1.
        folder: PathBuf,
    },
}

fn pace(text: &str) -> Result<f64, String> {
    match text.parse() {
        Ok(pace) if (1.0..=1_000.0).contains(&pace) => Ok(pace),
        _ => Err("accepted is a number from 1 to 1000".into()),
    }
}

fn main() -> ExitCode {
    match Arguments::parse().command {
        Command::Run { config, new_epoch } => {
            let opening = if new_epoch {
                Opening::NewEpoch
            } else {
                Opening::Continue
            };
            match config
                .as_deref()
                .map_or_else(|| Ok(Config::default()), config::load)
            {
                Ok(loaded) => in_runtime(|signals| run(loaded, config, opening, signals)),
                Err(faults) => at_fault(&faults),
            }
        }
        Command::Sample { pace, store } => in_runtime(|signals| run_sample(pace, store, signals)),
        Command::Check { config } => match config::load(&config) {
            Ok(_) => {
                println!("{}: no fault", config.display());
                ExitCode::SUCCESS
            }
            Err(faults) => at_fault(&faults),
        },
        Command::Manual { folder } => match manual(&folder) {
            Ok(()) => ExitCode::SUCCESS,
            Err(fault) => {
                eprintln!(
                    "the man pages cannot be written to {}: {fault}",
                    folder.display()
                );
                ExitCode::from(EX_IOERR)
            }
        },
    }
}

fn manual(folder: &Path) -> std::io::Result<()> {
    std::fs::create_dir_all(folder)?;
    clap_mangen::generate_to(Arguments::command(), folder)
}

fn at_fault(faults: &config::Faults) -> ExitCode {
    eprintln!("{faults}");
    ExitCode::from(EX_CONFIG)
}

fn in_runtime<W: Future<Output = ExitCode>>(work: impl FnOnce(Signals) -> W) -> ExitCode {
    let runtime = tokio::runtime::Builder::new_multi_thread()
        .enable_all()
        .build();
    let prepared = runtime.and_then(|runtime| {
        let signals = runtime.block_on(async { Signals::catch() })?;
        Ok((runtime, signals))
    });
    match prepared {
        Ok((runtime, signals)) => runtime.block_on(work(signals)),
        Err(fault) => {
            eprintln!("the system gives no threads or no signals: {fault}");
            ExitCode::from(EX_SOFTWARE)
        }
    }
}

async fn run(
    config: Config,
    file: Option<PathBuf>,
    opening: Opening,
    signals: Signals,
) -> ExitCode {
    start_log(config.log, "info");
    if let Some(file) = &file {
        let (clocks, crossings) = (config.clocks.len(), config.crossings.len());
        tracing::info!(file = %file.display(), clocks, crossings, "configuration read");
    }
    match Daemon::builder(config).opening(opening).start().await {
        Ok(daemon) => serve(daemon, signals, file, std::future::pending()).await,
        Err(fault) => not_started(&fault),
    }
}

async fn run_sample(pace: f64, store: Option<PathBuf>, signals: Signals) -> ExitCode {
    let kept = store.is_some();
    let folder = store.unwrap_or_else(|| {
        std::env::temp_dir().join(format!("ratewright-sample-{}", std::process::id()))
    });
    let config = sample::config(folder.clone());
    // The summaries have the terminal to themselves, unless something is wrong, or it ends.
    start_log(config.log, "warn,ratewrightd=info");
    let code = match Daemon::builder(config).pace(pace).start().await {
        Ok(daemon) => {
            let played = sample::run(daemon.grpc(), daemon.people(), daemon.house());
            serve(daemon, signals, None, played).await
        }
        Err(fault) => not_started(&fault),
    };
    if !kept
        && folder.exists()
        && let Err(fault) = std::fs::remove_dir_all(&folder)
    {
        tracing::warn!(%fault, folder = %folder.display(), "the sample's store is still there");
    }
    code
}

/// Serves until a signal, a failure, or the end of what is played.
async fn serve(
    mut daemon: Daemon,
    mut signals: Signals,
    file: Option<PathBuf>,
    played: impl Future<Output = Result<(), sample::SampleError>>,
) -> ExitCode {
    let mut played = std::pin::pin!(played);
    let code = loop {
        tokio::select! {
            heard = signals.heard() => match heard {
                Heard::Stop(signal) => {
                    tracing::info!(signal, "told to stop");
                    break ExitCode::SUCCESS;
                }
                Heard::Reload => reload(&daemon, file.as_deref()).await,
            },
            fault = daemon.failed() => {
                tracing::error!(%fault, "the daemon failed");
                break ExitCode::from(status_of(&fault));
            }
            ended = &mut played => break match ended {
                Ok(()) => ExitCode::SUCCESS,
                Err(fault) => {
                    tracing::error!(%fault, "the sample facility failed");
                    ExitCode::from(EX_SOFTWARE)
                }
            },
        }
    };
    match daemon.drain().await {
        Ok(()) => code,
        Err(fault) => {
            tracing::error!(%fault, "the last snapshot was not written");
            ExitCode::from(status_of(&fault))
        }
    }
}

/// Reads the declarations again. A fault changes nothing but the log.
async fn reload(daemon: &Daemon, file: Option<&Path>) {
    let Some(file) = file else {
        return tracing::warn!("there is no configuration file to read again");
    };
    match config::load(file) {
        Ok(config) => {
            let file = file.display();
            let (clocks, crossings) = (config.clocks.len(), config.crossings.len());
            match daemon.redeclare(config).await {
                Ok(changed) => {
                    tracing::info!(%file, clocks, crossings, changed, "declarations read again");
                }
                Err(fault) => tracing::error!(%file, %fault, "declarations stay as they were"),
            }
        }
        Err(faults) => {
            for fault in faults.faults.iter() {
                tracing::error!(file = %file.display(), line = fault.line, %fault, "declarations stay as they were");
            }
        }
    }
}

fn status_of(fault: &Failed) -> u8 {
    match fault {
        Failed::Store(_) => EX_IOERR,
        Failed::Engine => EX_SOFTWARE,
    }
}

/// The signals that are heeded. They are caught from here on: one that comes while the daemon starts is
/// heeded once it serves.
struct Signals {
    terminate: Signal,
    interrupt: Signal,
    hangup: Signal,
}

/// What a signal asks for.
enum Heard {
    /// A drain; the signal's name.
    Stop(&'static str),
    /// The configuration's declarations, read again.
    Reload,
}

impl Signals {
    /// Must be called within the runtime.
    fn catch() -> std::io::Result<Self> {
        let terminate = signal(SignalKind::terminate())?;
        Ok(Self {
            terminate,
            interrupt: signal(SignalKind::interrupt())?,
            hangup: signal(SignalKind::hangup())?,
        })
    }

    async fn heard(&mut self) -> Heard {
        tokio::select! {
            _ = self.terminate.recv() => Heard::Stop("SIGTERM"),
            _ = self.interrupt.recv() => Heard::Stop("SIGINT"),
            _ = self.hangup.recv() => Heard::Reload,
        }
    }
}

fn not_started(fault: &StartFault) -> ExitCode {
    tracing::error!(%fault, "not started");
    ExitCode::from(match fault {
        StartFault::Listen { .. } => EX_UNAVAILABLE,
        StartFault::Recover(RecoverFault::Declaration { .. }) => EX_CONFIG,
        StartFault::Recover(RecoverFault::Panicked) | StartFault::Reflection(_) => EX_SOFTWARE,
        StartFault::Recover(_) => EX_IOERR,
    })
}

/// The log goes to standard error; `RUST_LOG` chooses what is in it, `least` if it is not set.
fn start_log(format: LogFormat, least: &str) {
    let filter = EnvFilter::try_from_default_env().unwrap_or_else(|_| EnvFilter::new(least));
    let log = tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_ansi(std::io::stderr().is_terminal())
        .with_writer(std::io::stderr);
    match format {
        LogFormat::Text => log.init(),
        LogFormat::Json => log.json().init(),
    }
}
