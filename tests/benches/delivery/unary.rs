//! One setting, asked for again and again.

use std::time::{Duration, Instant};

use ratewright_proto::v1;

use crate::{line, median, side::Side};

const ROUND: Duration = Duration::from_secs(2);
const ROUNDS: usize = 7;
const CONNECTIONS: usize = 4;
const IN_FLIGHT: usize = 8;

pub(crate) async fn compare(sides: [&Side; 2]) {
    let mut rates = [Vec::new(), Vec::new()];
    for _ in 0..ROUNDS {
        for (side, rates) in sides.iter().zip(&mut rates) {
            rates.push(round(side).await);
        }
    }
    line(
        "unary get, 32 in flight on 4 connections",
        "calls/s",
        rates.map(median),
        "wanted 0.8 or more",
    );
}

async fn round(side: &Side) -> f64 {
    let mut loads = Vec::new();
    let until = Instant::now() + ROUND;
    for _ in 0..CONNECTIONS {
        let ratios = side.ratios().await;
        for _ in 0..IN_FLIGHT {
            let mut ratios = ratios.clone();
            loads.push(tokio::spawn(async move {
                let mut calls = 0_u32;
                while Instant::now() < until {
                    let name = "crossings/line/settings/latest".into();
                    let asked = ratios.get_setting(v1::GetSettingRequest { name }).await;
                    asked.expect("there is a setting");
                    calls += 1;
                }
                f64::from(calls)
            }));
        }
    }
    let mut calls = 0.0;
    for load in loads {
        calls += load.await.expect("a load does not panic");
    }
    calls / ROUND.as_secs_f64()
}
