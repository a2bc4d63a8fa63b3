//! Readings against house time whose times are hardly house time.

use ratewright_client::{Client, Measurement};

use crate::show;

/// Readings whose newest is further from house time than this are hardly what was meant.
const FAR_NS: i64 = 3_600_000_000_000;

/// When a reading was taken, on its reference, ns.
pub(super) fn reference_ns(measurement: &Measurement) -> i64 {
    match *measurement {
        Measurement::Counter { reference_ns, .. }
        | Measurement::SenderReport { reference_ns, .. }
        | Measurement::Frequency { reference_ns, .. } => reference_ns,
        Measurement::Exchange(exchange) => exchange.t3_ns,
    }
}

/// Says so on standard error if the newest reading is far from the daemon's house time. A daemon that
/// does not tell its time leaves nothing to say.
pub(super) async fn warn_if_far(client: &Client, newest_ns: i64) {
    if let Ok(exchange) = client.exchange_time(|| 0).await
        && let Some(warning) = warning(newest_ns, exchange.t2_ns)
    {
        eprintln!("ratewright: {warning}");
    }
}

fn warning(newest_ns: i64, house_ns: i64) -> Option<String> {
    let behind_ns = house_ns.saturating_sub(newest_ns);
    if behind_ns.saturating_abs() <= FAR_NS {
        return None;
    }
    let side = if behind_ns > 0 { "before" } else { "after" };
    Some(format!(
        "the newest reading is of {newest_ns} ns on its reference, {} {side} house time, which is \
         {house_ns} ns now; house time is ns since 1970-01-01, TAI: in a shell \
         $(( $(date +%s%N) + 37000000000 ))",
        show::duration(behind_ns.saturating_abs() as f64 * 1e-9)
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_that_are_hardly_house_time_are_told_with_both() {
        let house_ns = 1_796_147_224_404_578_918;
        assert_eq!(warning(house_ns - 37_000_000_000, house_ns), None);
        assert_eq!(warning(house_ns - FAR_NS, house_ns), None);
        for (newest_ns, how) in [
            (1_199_000_000_000, "57.0 years before"),
            (house_ns + 7_200_000_000_000, "h after"),
        ] {
            let warning = warning(newest_ns, house_ns).expect("it is far");
            assert!(warning.contains(&newest_ns.to_string()), "{warning}");
            assert!(warning.contains(&house_ns.to_string()), "{warning}");
            assert!(warning.contains(how), "{warning}");
        }
    }
}
