//! A facility as plain data.

use ratewright_control::{ClockDeclaration, CrossingDeclaration, Id};
use ratewright_timing::sim::ClockModel;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::{
    follower::Follower,
    link::{Delay, Link},
};

/// A facility that could exist. Together with a seed and an origin it becomes a [`Facility`](crate::Facility).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Plan {
    /// Machines that read the devices and report.
    pub hosts: Vec<Host>,
    /// Clocks that hosts read.
    pub devices: Vec<Device>,
    /// Clocks that follow house time by definition; nobody reads them.
    pub exact: Vec<ClockDeclaration>,
    /// Where streams pass from clock to clock.
    pub crossings: Vec<CrossingDeclaration>,
    /// Who runs the settings; a crossing without one is followed to the nanosecond, in silence.
    pub followers: Vec<Follower>,
}

/// A machine that compares its own clock with the house by two-way exchanges, and stamps the
/// readings of its devices with that clock.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Host {
    /// The host's clock; it counts nanoseconds, so its nominal rate is 1 GHz.
    pub clock: ClockDeclaration,
    /// What it truly does; its time 0 is the facility's origin.
    pub oscillator: ClockModel,
    /// What its clock shows at the origin, minus house time there, ns.
    pub ahead_ns: i64,
    /// The way to the house.
    pub link: Link,
    /// Time between exchanges, ns.
    pub exchange_every_ns: i64,
}

/// A clock that is read by a host.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Device {
    /// The device's clock.
    pub clock: ClockDeclaration,
    /// What it truly does; its time 0 is the facility's origin.
    pub oscillator: ClockModel,
    /// Id of the host that reads it.
    pub host: Id,
    /// Time between readings, ns.
    pub every_ns: i64,
    /// How it is read.
    pub reading: DeviceReading,
    /// When its counter begins at 0 again, ns since the origin, in order.
    pub resets_ns: Vec<i64>,
}

/// How a device is read.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum DeviceReading {
    /// The tick counter is latched at any moment, then the host's clock is read.
    Counter {
        /// Width of the counter, 1 to 64.
        bits: u32,
        /// From the latch to the reading of the host's clock.
        latch: Delay,
    },
    /// The media timestamp of a stream's packets, as the host receives them.
    SenderReport {
        /// Width of the timestamp, 1 to 64.
        bits: u32,
        /// From the timestamp's instant to the reading of the host's clock.
        latch: Delay,
    },
    /// A frequency counter on house time.
    Frequency {
        /// Standard deviation of its result, dimensionless.
        deviation: f64,
    },
}

/// Why a plan was refused.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("{field} is {value}; accepted: {accepted}")]
pub struct PlanError {
    /// Path of the field at fault, such as `devices[3].host`.
    pub field: String,
    /// Its value.
    pub value: String,
    /// What is accepted.
    pub accepted: &'static str,
}

/// Shortest time between the readings of a clock: shorter ones would overtake each other on the way.
const LEAST_INTERVAL_NS: i64 = 100_000_000;

impl Plan {
    /// Every clock of the plan.
    pub fn clocks(&self) -> impl Iterator<Item = &ClockDeclaration> {
        let hosts = self.hosts.iter().map(|host| &host.clock);
        let devices = self.devices.iter().map(|device| &device.clock);
        hosts.chain(&self.exact).chain(devices)
    }

    /// Checks what the types leave open. (The declarations are the engine's to judge.)
    pub(crate) fn check(&self) -> Result<(), PlanError> {
        for (i, host) in self.hosts.iter().enumerate() {
            check_interval(
                || format!("hosts[{i}].exchange_every_ns"),
                host.exchange_every_ns,
            )?;
            check_share(|| format!("hosts[{i}].link.loss"), host.link.loss)?;
        }
        for (i, device) in self.devices.iter().enumerate() {
            check_interval(|| format!("devices[{i}].every_ns"), device.every_ns)?;
            self.check_host(i, &device.host)?;
            check_reading(i, device.reading)?;
        }
        for (i, follower) in self.followers.iter().enumerate() {
            self.check_follower(i, follower)?;
        }
        Ok(())
    }

    fn check_follower(&self, i: usize, follower: &Follower) -> Result<(), PlanError> {
        let refused = |field: &str, value: String, accepted| {
            Err(PlanError {
                field: format!("followers[{i}].{field}"),
                value,
                accepted,
            })
        };
        if !self
            .crossings
            .iter()
            .any(|crossing| crossing.id == follower.crossing)
        {
            return refused(
                "crossing",
                follower.crossing.to_string(),
                "the id of a crossing of the plan",
            );
        }
        if follower.block_samples == 0 {
            return refused("block_samples", "0".to_owned(), "1 and above");
        }
        if let Some(levels) = follower.levels {
            check_interval(
                || format!("followers[{i}].levels.every_ns"),
                levels.every_ns,
            )?;
            if levels.deviation_samples.is_nan() || levels.deviation_samples <= 0.0 {
                let value = levels.deviation_samples.to_string();
                return refused("levels.deviation_samples", value, "greater than 0");
            }
        }
        Ok(())
    }

    fn check_host(&self, i: usize, id: &Id) -> Result<(), PlanError> {
        if self.hosts.iter().any(|host| host.clock.id == *id) {
            return Ok(());
        }
        Err(PlanError {
            field: format!("devices[{i}].host"),
            value: id.to_string(),
            accepted: "the id of a host of the plan",
        })
    }
}

fn check_interval(field: impl Fn() -> String, value: i64) -> Result<(), PlanError> {
    if value >= LEAST_INTERVAL_NS {
        return Ok(());
    }
    Err(PlanError {
        field: field(),
        value: value.to_string(),
        accepted: "100000000 (0.1 s) and above",
    })
}

fn check_share(field: impl Fn() -> String, value: f64) -> Result<(), PlanError> {
    if (0.0..1.0).contains(&value) {
        return Ok(());
    }
    Err(PlanError {
        field: field(),
        value: value.to_string(),
        accepted: "0 to less than 1",
    })
}

fn check_reading(i: usize, reading: DeviceReading) -> Result<(), PlanError> {
    let field = |name: &str| format!("devices[{i}].reading.{name}");
    match reading {
        DeviceReading::Counter { bits, .. } | DeviceReading::SenderReport { bits, .. }
            if !(1..=64).contains(&bits) =>
        {
            Err(PlanError {
                field: field("bits"),
                value: bits.to_string(),
                accepted: "1 to 64",
            })
        }
        DeviceReading::Frequency { deviation } if deviation.is_nan() || deviation <= 0.0 => {
            Err(PlanError {
                field: field("deviation"),
                value: deviation.to_string(),
                accepted: "greater than 0",
            })
        }
        _ => Ok(()),
    }
}
