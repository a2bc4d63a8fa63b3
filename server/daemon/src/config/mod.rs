//! What the daemon is told at start: a TOML file, read whole, checked whole, before anything binds.
//!
//! | key | unit, range | default | meaning |
//! | --- | --- | --- | --- |
//! | `listen.grpc` | address:port | `127.0.0.1:7420` | where gRPC is served; port 0 takes any free one |
//! | `listen.people` | address:port | `127.0.0.1:7421` | where the page, the metrics and the probes are served |
//! | `listen.max_streams` | 1 to 1,000,000 | 20000 | open report, watch and follow streams served at once |
//! | `listen.max_connections` | 1 to 1,000,000 | 10000 | gRPC connections open at once; one more is closed as it comes |
//! | `listen.max_connection_age_s` | s, 0, or 1 to 2592000 | 0 | after this, within a tenth of it, a gRPC connection is told to go elsewhere; 0 for never |
//! | `store.folder` | path | `ratewright-store` | where everything that must survive is kept |
//! | `store.keep_settings` | 100 to 1,000,000,000 | 10000 | of each crossing as many settings are kept at least, and as many acts at most; older ones are dropped |
//! | `shutdown.grace_s` | s, 0 to 3600 | 10 | how long open streams and calls may last once the daemon drains |
//! | `log.format` | `text`, `json` | `text` | lines for people, or an object a line |
//! | `house.tai_minus_utc_s` | s, 0 to 100 | 37 | added to the system's UTC to begin house time |
//! | `[[clock]]` `id` | name | needed | 1 to 63 of a-z, 0-9 and -, beginning with a letter |
//! | `[[clock]]` `title` | at most 128 bytes | empty | for people |
//! | `[[clock]]` `rate` | Hz, exact | needed | `48000`, `"44.1k"`, `"30000/1001"`, `"48000*1000/1001"` |
//! | `[[clock]]` `exact` | true, false | false | derived from house time itself, never measured |
//! | `[[clock]]` `tolerance_ppm` | ppm, 0 to 10000 | 0 | largest drift its maker states; 0 for not stated |
//! | `[[clock]]` `oscillator` | `crystal`, `compensated`, `oven`, `atomic` | a plain crystal | what is believed of it before it is measured, and how far it may wander |
//! | `[[clock]]` `tail` | `reference-late`, `counter-late` | `reference-late` | which side of a one-way reading is late when it is not punctual |
//! | `[[clock]]` `quantum_ns` | ns, 0 to 10^9 | 0 | known step of its counter or timestamps; 0 for not known |
//! | `[[clock]]` `statistics` | true, false | false | stability statistics of it are kept |
//! | `[[crossing]]` `id`, `title` | as above | | |
//! | `[[crossing]]` `source`, `sink` | `id` of a clock of the file | needed | samples enter by the one and leave by the other |
//! | `[[crossing]]` `backup` | `id` of a clock of the file | none | another source that can carry the same stream |
//! | `[[crossing]]` `max_l`, `max_m` | 1 to 2^31 | 1024 | what the filter bank can run; `max_l` is the number of phases of one that steps |
//! | `[[crossing]]` `headroom_samples` | sink samples, above 0 to 10^9 | 1 | hard limit of the phase error, both ways |
//! | `[[crossing]]` `realisation` | `single`, `cadence`, `stepping`, `lazy` | `cadence` | one ratio only; two in turn at block ends; one table of phases; two, each held as long as a swing allows |
//! | `[[crossing]]` `group` | name | none | crossings of a group change at the same instant |
//! | `[[crossing]]` `lead_s` | s, 0.001 to 60 | 1 | from a decision to its effect |
//! | `[[crossing]]` `review_horizon_s` | s, 10 to 2592000 | 86400 | longest trust in a setting that is not renewed |
//! | `[[crossing]]` `least_hold_s` | s, 0 to 3600 | 0 | least time between two settings that change what is run |
//! | `[[crossing]]` `pitch_limit_ppm` | ppm, 0.1 to 1000 | 20 | fastest change of pitch to bring the phase error back |
//! | `[[crossing]]` `silent` | true, false | false | a trial: decided and recorded, but no follower hears of it |

use std::{
    net::{Ipv4Addr, SocketAddr},
    path::{Path, PathBuf},
    time::Duration,
};

use ratewright_control::{ClockDeclaration, CrossingDeclaration};
use ratewright_declarations::{Declarations, Section, Sheet, integer, number, text};
pub use ratewright_declarations::{Fault, Faults};

use crate::house::TAI_MINUS_UTC_S;

/// Configuration of a daemon, already checked.
#[derive(Clone, Debug, PartialEq)]
pub struct Config {
    /// Where gRPC is served. Default 127.0.0.1:7420; port 0 takes any free one.
    pub grpc: SocketAddr,
    /// Where people and Prometheus are served. Default 127.0.0.1:7421.
    pub people: SocketAddr,
    /// Folder of the store; made if it is missing.
    pub store: PathBuf,
    /// How long open streams and calls may last once the daemon drains. Default 10 s.
    pub drain_grace: Duration,
    /// How the log is written.
    pub log: LogFormat,
    /// TAI − UTC in seconds.
    pub tai_minus_utc_s: i64,
    /// Open streams (report, watch, follow) that are served at once. Default 20,000.
    pub max_streams: usize,
    /// gRPC connections that are open at once; one more is closed as it comes. Default 10,000.
    pub max_connections: usize,
    /// How old a gRPC connection gets, give or take a tenth, before it is told to go elsewhere.
    /// Default: as old as it wants.
    pub max_connection_age: Option<Duration>,
    /// Settings of each crossing that are kept at least, and acts on it at most. Default 10,000.
    pub keep_settings: u64,
    /// Clocks declared in the file.
    pub clocks: Vec<ClockDeclaration>,
    /// Crossings declared in the file.
    pub crossings: Vec<CrossingDeclaration>,
}

/// How the log is written.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LogFormat {
    /// Lines for people.
    Text,
    /// An object a line, for machines.
    Json,
}

impl Default for Config {
    fn default() -> Self {
        Self {
            grpc: SocketAddr::from((Ipv4Addr::LOCALHOST, 7420)),
            people: SocketAddr::from((Ipv4Addr::LOCALHOST, 7421)),
            store: PathBuf::from("ratewright-store"),
            drain_grace: Duration::from_secs(10),
            log: LogFormat::Text,
            tai_minus_utc_s: TAI_MINUS_UTC_S,
            max_streams: 20_000,
            max_connections: 10_000,
            max_connection_age: None,
            keep_settings: 10_000,
            clocks: Vec::new(),
            crossings: Vec::new(),
        }
    }
}

/// Reads and checks a configuration file.
///
/// # Errors
/// [`Faults`] lists every fault, not only the first: syntax first, since nothing else can be read
/// while that is wrong, then all keys, values and references at once.
pub fn load(path: &Path) -> Result<Config, Faults> {
    let file = path.display().to_string();
    let read = std::fs::read_to_string(path).map_err(|error| Fault::unreadable(&error));
    let parsed = read
        .map_err(|fault| vec![fault])
        .and_then(|text| parse(&text));
    parsed.map_err(|faults| Faults { file, faults })
}

/// Checks the text of a configuration file.
///
/// # Errors
/// Every fault, in the order of its lines.
pub fn parse(text: &str) -> Result<Config, Vec<Fault>> {
    let sheet = Sheet::new(text);
    let table = sheet.table()?;
    let root = Section::root(&sheet, &table);
    let mut config = Config::default();
    root.section("listen", |section| listen(section, &mut config));
    root.section("store", |section| store(section, &mut config));
    root.section("shutdown", |section| shutdown(section, &mut config));
    root.section("log", |section| log(section, &mut config));
    root.section("house", |section| house(section, &mut config));
    declarations(&root, &mut config);
    root.close();
    sheet.finish(config)
}

fn listen(section: &Section<'_>, config: &mut Config) {
    const ADDRESS: &str = "an address and a port, such as \"127.0.0.1:7420\" or \"[::]:7420\"";
    let address = |value: &_| text(value)?.parse().ok();
    section.set("grpc", ADDRESS, &mut config.grpc, address);
    section.set("people", ADDRESS, &mut config.people, address);
    section.set(
        "max_streams",
        "1 to 1000000",
        &mut config.max_streams,
        |value| integer(value, 1, 1_000_000)?.try_into().ok(),
    );
    section.set(
        "max_connections",
        "1 to 1000000",
        &mut config.max_connections,
        |value| integer(value, 1, 1_000_000)?.try_into().ok(),
    );
    section.set(
        "max_connection_age_s",
        "0 for none, or 1 to 2592000 seconds",
        &mut config.max_connection_age,
        |value| match number(value, 0.0, 2_592_000.0)? {
            0.0 => Some(None),
            age_s if age_s >= 1.0 => Some(Some(Duration::from_secs_f64(age_s))),
            _ => None,
        },
    );
    if config.grpc == config.people && config.grpc.port() != 0 {
        section.fault(
            "people",
            &config.people.to_string(),
            "another address or port than listen.grpc",
        );
    }
}

fn store(section: &Section<'_>, config: &mut Config) {
    section.set(
        "folder",
        "the path of a folder",
        &mut config.store,
        |value| {
            text(value)
                .filter(|path| !path.is_empty())
                .map(PathBuf::from)
        },
    );
    section.set(
        "keep_settings",
        "100 to 1000000000",
        &mut config.keep_settings,
        |value| integer(value, 100, 1_000_000_000)?.try_into().ok(),
    );
}

fn shutdown(section: &Section<'_>, config: &mut Config) {
    section.set(
        "grace_s",
        "0 to 3600 seconds",
        &mut config.drain_grace,
        |value| number(value, 0.0, 3_600.0).map(Duration::from_secs_f64),
    );
}

fn log(section: &Section<'_>, config: &mut Config) {
    section.set(
        "format",
        "\"text\" or \"json\"",
        &mut config.log,
        |value| match text(value)? {
            "text" => Some(LogFormat::Text),
            "json" => Some(LogFormat::Json),
            _ => None,
        },
    );
}

fn house(section: &Section<'_>, config: &mut Config) {
    section.set(
        "tai_minus_utc_s",
        "0 to 100 seconds",
        &mut config.tai_minus_utc_s,
        |value| integer(value, 0, 100),
    );
}

/// What has a fault is noted and left out.
fn declarations(root: &Section<'_>, config: &mut Config) {
    let mut declarations = Declarations::default();
    let read = root.each("clock", |section| declarations.clock(section));
    config.clocks = read.into_iter().flatten().collect();
    let read = root.each("crossing", |section| declarations.crossing(section));
    config.crossings = read.into_iter().flatten().collect();
}

#[cfg(test)]
mod tests;
