#![allow(missing_docs, clippy::print_stdout, reason = "probe")]
#[path = "../tests/world/mod.rs"]
mod world;
use ratewright_control::*;
use ratewright_timing::sim::Delay;
use world::*;

fn main() {
    let a: Vec<String> = std::env::args().collect();
    let e: f64 = a[1].parse().unwrap();
    let noise: f64 = a[2].parse().unwrap();
    let walk: f64 = a[3].parse().unwrap();
    let drift: f64 = a[4].parse().unwrap();
    let src: u64 = a[5].parse().unwrap();
    let hours: i64 = a[6].parse().unwrap();
    let mut w = World::new();
    w.add_exact("house", 48_000);
    w.add(
        clock("dev", src),
        crystal(drift, walk),
        Delay::Normal { deviation_s: noise },
        SECOND,
    );
    w.cross(CrossingDeclaration {
        headroom_samples: e,
        ..crossing("x", "dev", "house")
    });
    let mut worst_after = 0f64;
    for h in 0..hours {
        for q in 0..4 {
            w.run_until(h * HOUR + (q + 1) * HOUR / 4);
            let s = w.engine.status(&id("x"), w.now).unwrap();
            let est = w.engine.estimate(&id("dev"), w.now).unwrap();
            let t = w.tally("x").clone();
            let ph = w.phase("x");
            if h < 3 || q == 3 {
                println!(
                    "{:6.2}h set {} chg {} worst {:.3} acct {:.4} phi {:+.4} (eng {:+.4} ± {:.4}) state {:?} {:?} hold {:.0} y {:.4e} d {:.2e} xd {:.1}ns slip {:?} {}",
                    (h * 4 + q + 1) as f64 / 4.0,
                    t.settings.len(),
                    t.changes.len(),
                    t.worst,
                    t.worst_account,
                    ph,
                    s.phase_error_samples,
                    s.phase_deviation_samples,
                    s.state,
                    est.estimate.state,
                    s.setting.as_ref().unwrap().evidence.expected_hold_s,
                    est.estimate.drift - drift,
                    est.estimate.deviation,
                    est.estimate.phase_deviation_ns,
                    s.seconds_to_slip.map(|x| x.round()),
                    s.reason
                );
            }
            if h >= 1 {
                worst_after = worst_after.max(t.worst);
            }
            w.forget();
        }
    }
    println!("worst after 1h {worst_after}");
}
