//! Prints a picture of an invented phase error, to look at: `... --example phase > phase.svg`.
#![allow(clippy::print_stdout, reason = "an example prints its picture")]

use ratewright_pictures::{Moment, PhaseStory, Stretch};

fn main() {
    let curve = |off: f64| {
        let value = |t: f64| 30.0 * libm::sin(t / 9_000.0) + 6.0 * libm::sin(t / 700.0) + off;
        (0..86_400)
            .map(|i| f64::from(i) * 2.0)
            .map(|at_s| Moment {
                at_s,
                value: value(at_s),
            })
            .collect()
    };
    let story = PhaseStory {
        crossing: "studio-programme".to_owned(),
        headroom_samples: 48.0,
        truth: curve(0.0),
        account: curve(1.5),
        changes_s: (1..30).map(|i| f64::from(i * i) * 190.0).collect(),
        without_readings: vec![Stretch {
            from_s: 40_000.0,
            to_s: 43_600.0,
        }],
        length_s: 172_800.0,
    };
    print!("{}", story.draw().file());
}
