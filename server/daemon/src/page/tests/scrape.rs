//! What Prometheus is told.

use super::*;
use crate::board::Applied;

/// Every metric of the documented table, and none that is not in it; no sample without HELP and TYPE.
#[tokio::test]
async fn the_metrics_are_those_of_the_table() {
    use std::{collections::BTreeSet, time::Duration};
    metrics::install();
    metrics::readings(1, 1);
    metrics::commit(1, Duration::from_millis(1));
    metrics::open_streams("watch", 1);
    metrics::applied(1_000_000);
    metrics::store(1, 4_096);
    let rig = Rig::sample(200);
    let board = &rig.sources.board;
    let named = Id::new("web").expect("an id");
    board.publish(News {
        applied: vec![Applied {
            crossing: named,
            setting: (0, 0),
            house_ns: 0,
        }],
        ..News::default()
    });
    let crossing = &board.crossings(None, 1)[0];
    metrics::setting(
        crossing
            .status
            .setting
            .as_ref()
            .expect("every crossing has one"),
        Some(0),
    );
    let (from, to) = (crossing.status.state, crossing.status.state);
    let (crossing, reason) = (crossing.declaration.id.clone(), String::new());
    metrics::transition(&ratewright_control::Transition::Crossing {
        crossing,
        from,
        to,
        reason,
    });
    let text = rig.page("/metrics").await;

    let table: BTreeSet<&str> = include_str!("../../metrics/mod.rs")
        .lines()
        .filter_map(|line| line.strip_prefix("//! | `")?.split('`').next())
        .collect();
    let named = |kind: &str| -> BTreeSet<&str> {
        let names = text
            .lines()
            .filter_map(|line| line.strip_prefix(kind)?.split(' ').next());
        // What each system tells of a process is its own matter.
        names
            .map(|name| {
                if name.starts_with("process_") {
                    "process_*"
                } else {
                    name
                }
            })
            .collect()
    };
    assert_eq!(named("# TYPE "), table);
    assert_eq!(named("# HELP "), table);
    let base = |line: &str| {
        let name = line.split(['{', ' ']).next().unwrap_or_default().to_owned();
        let parts = ["_bucket", "_sum", "_count"].into_iter();
        parts.fold(name, |name, part| {
            name.strip_suffix(part).map_or(name.clone(), str::to_owned)
        })
    };
    for line in text
        .lines()
        .filter(|line| !line.starts_with('#') && !line.is_empty())
    {
        let known = line.starts_with("process_") || table.contains(base(line).as_str());
        assert!(known, "{line}");
        let value = line.rsplit(' ').next().unwrap_or_default();
        assert!(
            value == "+Inf" || value.parse::<f64>().is_ok_and(f64::is_finite),
            "{line}"
        );
    }
    assert!(text.contains("ratewright_clock_state{clock=\"house-word\",state=\"locked\"} 1"));
    assert!(text.contains("ratewright_crossing_headroom_samples{crossing=\"web\"} 64"));
}
