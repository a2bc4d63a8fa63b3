//! A rehearsal as people write it, in TOML. `deploy/rehearsal.example.toml` shows every key with its unit,
//! range and default.

mod events;
mod oscillator;
mod parts;

use std::cell::RefCell;

use ratewright_control::Id;
use ratewright_declarations::{Declarations, Fault, Section, Sheet, as_id, integer, number, text};
use ratewright_timing::sim::ClockModel;

use self::{
    events::event,
    oscillator::oscillator,
    parts::{follower, latch, link},
};
use crate::plan::{Device, DeviceReading, Host, Plan};

/// What a file asks for.
#[derive(Clone, Debug, PartialEq)]
pub struct Script {
    /// The facility, with everything that happens to it.
    pub plan: Plan,
    /// How long it is played, days.
    pub days: f64,
    /// Seed of its noise.
    pub seed: u64,
}

/// Reads a rehearsal.
///
/// # Errors
/// Every fault of the text, in the order of its lines.
///
/// ```
/// use ratewright_rehearsal::file::parse;
/// let faults = parse("days = 0\n[[clock]]\nid = 'desk'\nrate = 48000\nhost = 'nowhere'\n").unwrap_err();
/// assert_eq!(faults[0].line, 1);
/// assert_eq!(faults[0].to_string(), "days is 0; accepted: 0.001 to 366 days");
/// assert_eq!(faults[1].to_string(), "clock[0].host is \"nowhere\"; accepted: the id of a [[host]] of this file");
/// ```
pub fn parse(content: &str) -> Result<Script, Vec<Fault>> {
    let sheet = Sheet::new(content);
    let table = sheet.table()?;
    let root = Section::root(&sheet, &table);
    let (mut days, mut seed) = (1.0, 1);
    root.set("days", "0.001 to 366 days", &mut days, |value| {
        number(value, 0.001, 366.0)
    });
    root.set("seed", "0 to 9223372036854775807", &mut seed, |value| {
        integer(value, 0, i64::MAX)
    });
    let plan = plan(&root);
    root.close();
    sheet.finish(Script {
        plan,
        days,
        seed: seed.unsigned_abs(),
    })
}

/// What has a fault is noted and left out.
fn plan(root: &Section<'_>) -> Plan {
    let mut declarations = Declarations::default();
    let hosts: Vec<Host> = root
        .each("host", |section| host(section, &mut declarations))
        .into_iter()
        .flatten()
        .collect();
    let mut plan = Plan {
        hosts,
        devices: Vec::new(),
        exact: Vec::new(),
        crossings: Vec::new(),
        followers: Vec::new(),
    };
    let clocks = root.each("clock", |section| {
        clock(section, &mut declarations, &plan.hosts)
    });
    for clock in clocks.into_iter().flatten() {
        match clock {
            Clock::Device(device) => plan.devices.push(*device),
            Clock::Exact(clock) => plan.exact.push(clock),
        }
    }
    let crossings = root.each("crossing", |section| {
        let declared = declarations.crossing(section);
        let follower = follower(section);
        let crossing = declared?;
        Some((follower.of(crossing.id.clone()), crossing))
    });
    (plan.followers, plan.crossings) = crossings.into_iter().flatten().unzip();
    let plan = RefCell::new(plan);
    root.each("event", |section| {
        event(section, &mut plan.borrow_mut());
        Some(())
    });
    plan.into_inner()
}

fn host(section: &Section<'_>, declarations: &mut Declarations) -> Option<Host> {
    let clock = declarations.host(section);
    let ahead_ms = scalar(
        section,
        "ahead_ms",
        "-1000000 to 1000000 ms",
        (-1e6, 1e6),
        0.0,
    );
    let every_s = scalar(
        section,
        "exchange_every_s",
        "0.1 to 3600 seconds",
        (0.1, 3_600.0),
        1.0,
    );
    Some(Host {
        link: link(section),
        oscillator: oscillator(section),
        ahead_ns: (ahead_ms * 1e6) as i64,
        exchange_every_ns: nanoseconds(every_s),
        clock: clock?,
    })
}

enum Clock {
    Device(Box<Device>),
    Exact(ratewright_control::ClockDeclaration),
}

fn clock(section: &Section<'_>, declarations: &mut Declarations, hosts: &[Host]) -> Option<Clock> {
    let clock = declarations.clock(section);
    if clock.as_ref().is_some_and(|clock| clock.exact) {
        return clock.map(Clock::Exact);
    }
    let host = reader(section, hosts);
    let every_s = scalar(
        section,
        "every_s",
        "0.1 to 3600 seconds",
        (0.1, 3_600.0),
        1.0,
    );
    let (oscillator, reading): (ClockModel, _) = (oscillator(section), reading(section));
    Some(Clock::Device(Box::new(Device {
        clock: clock?,
        oscillator,
        host: host?,
        every_ns: nanoseconds(every_s),
        reading,
        resets_ns: Vec::new(),
    })))
}

fn reader(section: &Section<'_>, hosts: &[Host]) -> Option<Id> {
    const ACCEPTED: &str = "the id of a [[host]] of this file";
    let host = section.need("host", ACCEPTED, as_id)?;
    if !hosts.iter().any(|known| known.clock.id == host) {
        section.fault("host", &format!("\"{host}\""), ACCEPTED);
        return None;
    }
    Some(host)
}

fn reading(section: &Section<'_>) -> DeviceReading {
    let mut bits = 64;
    section.set("bits", "1 to 64", &mut bits, |value| {
        integer(value, 1, 64)?.try_into().ok()
    });
    let latch = latch(section);
    let deviation_ppb = scalar(
        section,
        "deviation_ppb",
        "0.001 to 1000000 ppb",
        (1e-3, 1e6),
        20.0,
    );
    let mut reading = DeviceReading::Counter { bits, latch };
    section.set(
        "read",
        "\"counter\", \"timestamps\" or \"frequency\"",
        &mut reading,
        |value| match text(value)? {
            "counter" => Some(DeviceReading::Counter { bits, latch }),
            "timestamps" => Some(DeviceReading::SenderReport { bits, latch }),
            "frequency" => Some(DeviceReading::Frequency {
                deviation: deviation_ppb * 1e-9,
            }),
            _ => None,
        },
    );
    reading
}

/// The number of a key, within a range, or its default.
fn scalar(
    section: &Section<'_>,
    key: &'static str,
    accepted: &str,
    (low, high): (f64, f64),
    default: f64,
) -> f64 {
    let mut value = default;
    section.set(key, accepted, &mut value, |written| {
        number(written, low, high)
    });
    value
}

fn nanoseconds(seconds: f64) -> i64 {
    libm::round(seconds * 1e9) as i64
}
