//! How steady the clocks are, of those that are declared with statistics.

use ratewright_control::Id;
use ratewright_timing::stability::OctaveFigures;

use super::text::Text;

/// Of the octaves of intervals, every so many has series of its own: 10 s, 80 s, 640 s and so on.
const EVERY: usize = 3;

/// A clock, and its figures by octave of the interval.
pub type Steadiness = (Id, Vec<OctaveFigures>);

type Value = fn(&OctaveFigures) -> Option<f64>;

const FAMILIES: [(&str, &str, Value); 3] = [
    (
        "ratewright_clock_allan_deviation_ratio",
        "Overlapping Allan deviation of the estimated phase at the interval.",
        |figures| figures.allan,
    ),
    (
        "ratewright_clock_time_deviation_seconds",
        "Time deviation of the estimated phase at the interval.",
        |figures| figures.time_s,
    ),
    (
        "ratewright_clock_mtie_seconds",
        "Maximum time interval error of the estimated phase at the interval.",
        |figures| figures.mtie_s,
    ),
];

pub(super) fn write(text: &mut Text, clocks: &[Steadiness]) {
    for (name, help, value) in FAMILIES {
        text.family(name, help);
        for (clock, octaves) in clocks {
            for figures in octaves.iter().step_by(EVERY) {
                let Some(value) = value(figures) else {
                    continue;
                };
                let tau_s = figures.tau_s;
                let labels = format!("{{clock=\"{clock}\",interval_seconds=\"{tau_s}\"}}");
                text.value(name, &labels, value);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use ratewright_timing::stability::Stability;

    use super::*;

    /// A phase that goes by 1 us each 10 s, and 1 us more in every other step.
    #[test]
    fn every_third_octave_that_was_seen_is_written() {
        let mut stability = Stability::new(10.0);
        for step in 0..40 {
            stability.push(1e-6 * f64::from(step + step % 2));
        }
        let clock = Id::new("desk").expect("a name");
        let mut text = Text(String::new());
        write(&mut text, &[(clock, stability.figures().collect())]);
        let lines: Vec<&str> = text
            .0
            .lines()
            .filter(|line| !line.starts_with('#'))
            .collect();
        let intervals = |family: &str| -> Vec<&str> {
            let of = lines.iter().filter(|line| line.starts_with(family));
            of.filter_map(|line| line.split('"').nth(3)).collect()
        };
        assert_eq!(
            intervals("ratewright_clock_allan_deviation_ratio{"),
            ["10", "80"]
        );
        assert_eq!(intervals("ratewright_clock_mtie_seconds{"), ["10", "80"]);
        // From step to step the phase goes by 0 or 2 us.
        let mtie = lines
            .iter()
            .find(|line| line.starts_with("ratewright_clock_mtie_seconds"));
        let value: f64 = mtie
            .and_then(|line| line.split(' ').nth(1))
            .expect("a value")
            .parse()
            .expect("a number");
        assert!((value - 2e-6).abs() < 1e-9, "{value}");
    }
}
