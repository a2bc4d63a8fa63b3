//! A crossing's phase error over time, between the limits of its buffer.

use plotters::element::Rectangle;

use crate::{
    Axis, Chart, Frame, Ink, Moment, Picture, Stretch,
    brush::{Unpaintable, curve, dashed, line, stroke, wash},
};

/// What the picture of a phase error is made from. Times are seconds since the beginning, phase errors
/// sink samples; positive fills the sink's buffer.
#[derive(Clone, Debug, PartialEq)]
pub struct PhaseStory {
    /// Name of the crossing.
    pub crossing: String,
    /// The hard limit, both ways, sink samples.
    pub headroom_samples: f64,
    /// Phase error in time: what was true.
    pub truth: Vec<Moment>,
    /// Phase error in time: what the account had.
    pub account: Vec<Moment>,
    /// When what is run was changed.
    pub changes_s: Vec<f64>,
    /// When a clock of the crossing was not read, or what else is to be shaded.
    pub without_readings: Vec<Stretch>,
    /// How long it lasted, s.
    pub length_s: f64,
}

impl PhaseStory {
    /// Draws it.
    pub fn draw(&self) -> Picture {
        let values = self
            .truth
            .iter()
            .chain(&self.account)
            .map(|moment| moment.value.abs());
        let farthest = values.fold(self.headroom_samples, f64::max);
        let across = Axis::elapsed(0.0, self.length_s);
        let up = Axis::even(
            "phase error, sink samples",
            -1.12 * farthest,
            1.12 * farthest,
        );
        let frame = Frame {
            title: format!("{}: phase error", self.crossing),
            description: self.description(),
            key: vec![
                (Ink::Slate, "true"),
                (Ink::Amber, "by the account"),
                (Ink::Brick, "headroom"),
                (Ink::Text, "changes of ratio, ticks below"),
            ],
            across,
            up,
        };
        frame.draw(|chart| self.paint(chart))
    }

    fn description(&self) -> String {
        let (least, most) = self
            .truth
            .iter()
            .fold((0.0_f64, 0.0_f64), |(least, most), m| {
                (least.min(m.value), most.max(m.value))
            });
        format!(
            "The true phase error lies between {least:.3} and {most:.3} sink samples; the headroom is {} \
             both ways; {} changes of what is run.",
            self.headroom_samples,
            self.changes_s.len(),
        )
    }

    fn paint(&self, chart: &mut Chart<'_>) -> Result<(), Unpaintable> {
        let (low, high) = (chart.y_range().start, chart.y_range().end);
        for gap in &self.without_readings {
            let (from, to) = (gap.from_s.max(0.0), gap.to_s.min(self.length_s));
            let corners = [(from, high), (to, low)];
            chart
                .plotting_area()
                .draw(&Rectangle::new(corners, wash(Ink::Quiet, 0.18)))?;
        }
        for limit in [-self.headroom_samples, self.headroom_samples] {
            let ends = [(0.0, limit), (self.length_s, limit)];
            dashed(chart, ends, stroke(Ink::Brick, 1.4))?;
        }
        for &at_s in &self.changes_s {
            let tick = [(at_s, low), (at_s, low + 0.035 * (high - low))];
            line(chart, tick, stroke(Ink::Text, 1.0))?;
        }
        curve(chart, &self.truth, Ink::Slate, 3.2)?;
        curve(chart, &self.account, Ink::Amber, 1.2)?;
        Ok(())
    }
}
