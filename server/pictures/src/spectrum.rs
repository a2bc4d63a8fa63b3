//! The spectrum of a tone.

use crate::{
    Axis, Chart, Frame, Ink, Moment, Picture,
    brush::{Unpaintable, curve},
};

/// What the picture of a spectrum is made from.
#[derive(Clone, Debug, PartialEq)]
pub struct SpectrumStory {
    /// What it is the spectrum of.
    pub title: String,
    /// Frequency of the first level, Hz; below 0 where frequencies are counted from the tone.
    pub first_hz: f64,
    /// From level to level, Hz.
    pub bin_hz: f64,
    /// Levels, dB relative to the tone.
    pub level_db: Vec<f64>,
    /// The lowest level shown, dB, below 0.
    pub floor_db: f64,
}

impl SpectrumStory {
    /// Draws it.
    pub fn draw(&self) -> Picture {
        let (label, unit) = if self.first_hz < 0.0 {
            ("from the tone, Hz", 1.0)
        } else {
            ("frequency, kHz", 1e-3)
        };
        let to_hz = self.first_hz + self.bin_hz * self.level_db.len() as f64;
        let frame = Frame {
            title: format!("{}: spectrum", self.title),
            description: self.description(),
            key: vec![(Ink::Slate, "level, dB relative to the tone")],
            across: Axis::even(label, self.first_hz * unit, to_hz * unit),
            up: Axis::even("dB", self.floor_db, 6.0),
        };
        frame.draw(|chart| self.paint(chart, unit))
    }

    fn hz(&self, bin: usize) -> f64 {
        self.first_hz + bin as f64 * self.bin_hz
    }

    fn description(&self) -> String {
        let places = self.level_db.iter().enumerate();
        let tone = places.max_by(|a, b| a.1.total_cmp(b.1));
        let tone_hz = tone.map_or(0.0, |(bin, _)| self.hz(bin));
        format!(
            "The level of each of {} bins of {:.3} Hz in dB relative to the tone at {tone_hz:.1} Hz.",
            self.level_db.len(),
            self.bin_hz,
        )
    }

    fn paint(&self, chart: &mut Chart<'_>, unit: f64) -> Result<(), Unpaintable> {
        // A curve in time is one across as well.
        let moment = |(bin, &level): (usize, &f64)| Moment {
            at_s: self.hz(bin) * unit,
            value: level.max(self.floor_db),
        };
        let levels: Vec<_> = self.level_db.iter().enumerate().map(moment).collect();
        curve(chart, &levels, Ink::Slate, 1.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_tone_is_named_and_what_lies_below_the_floor_stays_on_it() {
        let mut level_db = vec![-300.0; 1_001];
        level_db[100] = 0.0;
        let story = SpectrumStory {
            title: "desk".to_owned(),
            first_hz: 0.0,
            bin_hz: 10.0,
            level_db,
            floor_db: -180.0,
        };
        let svg = story.draw().inline();
        assert!(svg.contains("<title>desk: spectrum</title>"));
        assert!(svg.contains("relative to the tone at 1000.0 Hz"));
        // The floor is the lower edge of the plot, at 320 - 44 px.
        assert!(svg.contains("2759 "), "{svg}");
        assert!(!svg.contains("NaN"));
        let near = SpectrumStory {
            first_hz: -1_000.0,
            ..story
        };
        let svg = near.draw().inline();
        assert!(svg.contains("from the tone, Hz"));
        assert!(svg.contains("relative to the tone at 0.0 Hz"));
    }
}
