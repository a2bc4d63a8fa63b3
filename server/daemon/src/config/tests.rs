use num_rational::Ratio;
use ratewright_control::{Effects, Engine, Event, Realisation, Refusal};

use ratewright_timing::{LatencyTail, Oscillator};

use super::*;

const EXAMPLE: &str = include_str!("../../../../deploy/ratewrightd.example.toml");

fn faults(text: &str) -> Vec<String> {
    let faults = parse(text).unwrap_err();
    faults
        .iter()
        .map(|fault| format!("{}: {fault}", fault.line))
        .collect()
}

#[test]
fn an_empty_file_means_the_defaults() {
    assert_eq!(parse("").unwrap(), Config::default());
}

/// The example spells out every default, so that it can be read as the reference.
#[test]
fn the_example_parses_and_the_engine_takes_its_declarations() {
    let config = parse(EXAMPLE).unwrap();
    let defaults = Config {
        store: config.store.clone(),
        ..Config::default()
    };
    let plain = Config {
        clocks: Vec::new(),
        crossings: Vec::new(),
        ..config.clone()
    };
    assert_eq!(plain, defaults);
    assert!(config.clocks.len() >= 3 && config.crossings.len() >= 2);
    let mut engine = Engine::new(1);
    let mut apply = |event: Event| -> Result<Effects, Refusal> { engine.apply(&event, 1) };
    for clock in config.clocks {
        apply(Event::DeclareClock(clock)).unwrap();
    }
    for crossing in config.crossings {
        apply(Event::DeclareCrossing(crossing)).unwrap();
    }
}

#[test]
fn declarations_come_out_as_written() {
    let config = parse(
        r#"
        [[clock]]
        id = "desk"
        rate = "44.1k"
        [[clock]]
        id = "camera"
        title = "Camera 1"
        rate = "30000/1001"
        tolerance_ppm = 20
        oscillator = "oven"
        tail = "counter-late"
        quantum_ns = 1000
        [[clock]]
        id = "spare"
        rate = "44.1k"
        [[crossing]]
        id = "line"
        source = "desk"
        sink = "camera"
        max_l = 512
        headroom_samples = 2.5
        realisation = "single"
        group = "studio"
        lead_s = 0.25
        least_hold_s = 0.5
        silent = true
        backup = "spare"
        pitch_limit_ppm = 0.5
        [[crossing]]
        id = "table"
        source = "desk"
        sink = "camera"
        realisation = "stepping"
        [[crossing]]
        id = "swing"
        source = "desk"
        sink = "camera"
        realisation = "lazy"
        "#,
    )
    .unwrap();
    assert_eq!(config.clocks[0].nominal_hz, Ratio::from_integer(44_100));
    assert_eq!(config.clocks[1].nominal_hz, Ratio::new(30_000, 1001));
    let camera = &config.clocks[1];
    assert_eq!((camera.tolerance_ppm, camera.quantum_ns), (20.0, 1_000));
    assert_eq!(camera.oscillator, Some(Oscillator::Oven));
    assert_eq!(camera.tail, Some(LatencyTail::CounterLate));
    let line = &config.crossings[0];
    assert_eq!((line.bounds.max_l(), line.bounds.max_m()), (512, 1024));
    assert_eq!((line.headroom_samples, line.lead_ns), (2.5, 250_000_000));
    assert_eq!(line.realisation, Realisation::Single);
    assert_eq!(
        (line.pitch_limit_ppm, line.least_hold_ns),
        (0.5, 500_000_000)
    );
    assert_eq!(
        (line.silent, line.backup.as_ref().unwrap().as_str()),
        (true, "spare")
    );
    assert_eq!(config.crossings[1].realisation, Realisation::Stepping);
    assert_eq!(config.crossings[2].realisation, Realisation::Lazy);
    assert_eq!(line.group.as_ref().unwrap().as_str(), "studio");
}

#[test]
fn every_fault_is_reported_at_once_with_its_line() {
    let found = faults(
        r#"[listen]
grpc = "localhost"
people = 7421
ports = 2
[log]
format = "xml"
[house]
tai_minus_utc_s = 37.5
[[clock]]
id = "Desk"
rate = "0/5"
[[clock]]
id = "tape"
tolerance_ppm = -1
oscillator = "quartz"
[[crossing]]
id = "line"
source = "tape"
sink = "nowhere"
max_l = 0
headroom_samples = nan
realisation = "both"
backup = "nowhere"
least_hold_s = 3601
pitch_limit_ppm = 0
silent = "yes"
[shutdwon]
grace_s = 1
"#,
    );
    let expected = [
        "2: listen.grpc is \"localhost\"; accepted: an address",
        "3: listen.people is 7421; accepted: an address",
        "4: listen.ports is no key here; accepted: grpc, people, max_streams, max_connections",
        "6: log.format is \"xml\"; accepted: \"text\" or \"json\"",
        "8: house.tai_minus_utc_s is 37.5; accepted: 0 to 100 seconds",
        "10: clock[0].id is \"Desk\"; accepted: 1 to 63 of a-z",
        "11: clock[0].rate is \"0/5\"; accepted: a rate in Hz",
        "12: clock[1].rate is missing; accepted: a rate in Hz",
        "14: clock[1].tolerance_ppm is -1; accepted: 0 to 10000 ppm",
        "15: clock[1].oscillator is \"quartz\"; accepted: \"crystal\"",
        "19: crossing[0].sink is \"nowhere\"; accepted: the id of a [[clock]]",
        "20: crossing[0].max_l is 0; accepted: 1 to 2147483648",
        "21: crossing[0].headroom_samples is nan; accepted: above 0",
        "22: crossing[0].realisation is \"both\"; accepted: \"single\", \"cadence\"",
        "23: crossing[0].backup is \"nowhere\"; accepted: the id of a [[clock]]",
        "24: crossing[0].least_hold_s is 3601; accepted: 0 to 3600 seconds",
        "25: crossing[0].pitch_limit_ppm is 0; accepted: 0.1 to 1000 ppm",
        "26: crossing[0].silent is \"yes\"; accepted: true or false",
        "27: shutdwon is no key here; accepted: listen, store,",
    ];
    assert_eq!(found.len(), expected.len(), "{found:#?}");
    for (found, expected) in found.iter().zip(expected) {
        assert!(
            found.starts_with(expected),
            "{found:?} should begin {expected:?}"
        );
    }
}

#[test]
fn what_contradicts_is_reported() {
    let found = faults("[listen]\ngrpc = '0.0.0.0:80'\npeople = '0.0.0.0:80'");
    assert_eq!(
        found,
        ["3: listen.people is 0.0.0.0:80; accepted: another address or port than listen.grpc"]
    );
    let twice = "[[clock]]\nid = 'a'\nrate = 1\n[[clock]]\nid = 'a'\nrate = 1";
    assert_eq!(
        faults(twice),
        ["5: clock[1].id is \"a\" a second time; accepted: a name of its own"]
    );
    let itself = "[[clock]]\nid = 'a'\nrate = 1\n[[crossing]]\nid = 'b'\nsource = 'a'\nsink = 'a'";
    let expected = ["7: crossing[0].sink is a; accepted: another clock than the source"];
    assert_eq!(faults(itself), expected);
}

#[test]
fn all_faults_of_syntax_are_reported() {
    let found = faults("[listen]\ngrpc = \n[store\nfolder = 'x'\n");
    assert!(found.len() >= 2, "{found:#?}");
    assert!(found[0].starts_with("2: not TOML"), "{found:#?}");
    assert!(found[1].starts_with("3: not TOML"), "{found:#?}");
}

#[test]
fn a_wrong_kind_of_table_is_reported() {
    let found = faults("log = 3\n[clock]\nid = 'a'\n");
    assert_eq!(found[0], "1: log is 3; accepted: a table, written [log]");
    assert!(found[1].starts_with("2: clock is "), "{found:#?}");
    assert!(
        found[1].ends_with("accepted: tables, each written [[clock]]"),
        "{found:#?}"
    );
}

#[test]
fn a_file_that_is_not_there_is_a_fault_that_names_it() {
    let error = load(Path::new("/nonexistent/ratewrightd.toml"))
        .unwrap_err()
        .to_string();
    assert!(
        error.starts_with("/nonexistent/ratewrightd.toml: cannot be read"),
        "{error}"
    );
}

/// What only the engine knows is told with the line it stands in as well.
#[test]
fn limits_of_the_engine_are_faults_of_the_file() {
    let text = r#"
[[clock]]
id = "slow"
rate = 25
[[clock]]
id = "fast"
rate = "100M"
[[crossing]]
id = "far"
source = "slow"
sink = "fast"
[[crossing]]
id = "loop"
source = "slow"
sink = "slow"
"#;
    let found = faults(text);
    assert_eq!(found.len(), 2, "{found:?}");
    assert!(
        found[0].contains("rates within a factor of 1048576"),
        "{found:?}"
    );
    assert!(found[1].starts_with("15: crossing[1].sink"), "{found:?}");
}

#[test]
fn a_group_that_is_too_large_is_a_fault_of_the_first_too_many() {
    let mut text =
        String::from("[[clock]]\nid = \"a\"\nrate = 48000\n[[clock]]\nid = \"b\"\nrate = 48000\n");
    for i in 0..65 {
        text += &format!(
            "[[crossing]]\nid = \"c{i}\"\nsource = \"a\"\nsink = \"b\"\ngroup = \"all\"\n"
        );
    }
    let found = faults(&text);
    assert_eq!(found.len(), 1, "{found:?}");
    assert!(found[0].contains("crossing[64].group"), "{found:?}");
}

/// What the engine refuses is told by the file's own name of the key.
#[test]
fn a_backup_that_is_the_source_is_a_fault_of_the_backup() {
    let text = "[[clock]]\nid = 'a'\nrate = 1\n[[clock]]\nid = 'b'\nrate = 1\n[[crossing]]\nid = 'c'\n\
                source = 'a'\nsink = 'b'\nbackup = 'a'";
    let found = faults(text);
    assert_eq!(found.len(), 1, "{found:?}");
    assert!(
        found[0].starts_with("11: crossing[0].backup is a"),
        "{found:?}"
    );
}
