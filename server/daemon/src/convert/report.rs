//! What a follower reports.

use ratewright_control::{Event, Refusal};
use ratewright_proto::v1;

use super::{engine, names};
use crate::refused::Violation;

/// A setting took effect.
pub(crate) fn applied(sent: &v1::Applied) -> Result<Event, Violation> {
    let name = names::parse_setting("applied.setting", &sent.setting)?;
    let Some((epoch, number)) = name.numbered else {
        let accepted = "crossings/{id}/settings/{epoch}-{number}, the one that took effect";
        return Err(Violation::new(
            "applied.setting",
            names::quoted(&sent.setting),
            accepted,
        ));
    };
    let (crossing, house_ns, sink_sample) = (name.crossing, sent.house_ns, sent.sink_sample);
    Ok(Event::Applied {
        crossing,
        epoch,
        number,
        house_ns,
        sink_sample,
    })
}

/// A buffer level was measured.
pub(crate) fn occupancy(sent: &v1::Occupancy) -> Result<Event, Violation> {
    let crossing = names::parse_crossing("occupancy.crossing", &sent.crossing)?;
    let (level_samples, deviation_samples) = (sent.level_samples, sent.deviation_samples);
    if !(-1e9..=1e9).contains(&level_samples) {
        let accepted = "-10^9 to 10^9 sink samples";
        return Err(Violation::new(
            "occupancy.level_samples",
            level_samples,
            accepted,
        ));
    }
    if !(deviation_samples > 0.0 && deviation_samples <= 1e9) {
        let accepted = "above 0 to 10^9 sink samples";
        return Err(Violation::new(
            "occupancy.deviation_samples",
            deviation_samples,
            accepted,
        ));
    }
    Ok(Event::Occupancy {
        crossing,
        level_samples,
        deviation_samples,
        house_ns: sent.house_ns,
    })
}

/// What the engine refused of a report, with the path as the follower knows it.
pub(crate) fn refusal_by_engine(event: &Event, refused: Refusal) -> Violation {
    let parent = if matches!(event, Event::Applied { .. }) {
        "applied"
    } else {
        "occupancy"
    };
    let mut violation = engine::violation(refused, |field| match (parent, field) {
        // A setting's name carries the three on the wire.
        ("applied", "crossing" | "epoch" | "number") => "setting".into(),
        _ => field.into(),
    });
    if let Event::Applied {
        crossing,
        epoch,
        number,
        ..
    } = event
        && violation.field == "setting"
    {
        violation.value = format!("crossings/{crossing}/settings/{epoch}-{number}");
    }
    violation.below(parent)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reports_name_the_field_at_fault() {
        let setting = "crossings/a/settings/latest".to_string();
        let latest = v1::Applied {
            setting,
            ..Default::default()
        };
        assert_eq!(applied(&latest).unwrap_err().field, "applied.setting");
        let good = v1::Occupancy {
            crossing: "crossings/a".into(),
            level_samples: -3.5,
            deviation_samples: 0.5,
            house_ns: 7,
        };
        assert!(occupancy(&good).is_ok());
        let level = v1::Occupancy {
            level_samples: f64::NAN,
            ..good.clone()
        };
        assert_eq!(
            occupancy(&level).unwrap_err().field,
            "occupancy.level_samples"
        );
        let sure = v1::Occupancy {
            deviation_samples: 0.0,
            ..good
        };
        assert_eq!(
            occupancy(&sure).unwrap_err().field,
            "occupancy.deviation_samples"
        );
    }
}
