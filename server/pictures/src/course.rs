//! How a figure went with its 95 % band, and how it is foreseen to go on.

use crate::{
    Axis, Chart, Frame, Ink, Picture, Stretch,
    brush::{Unpaintable, dashed, line, stroke},
    mark::{path, shape},
};

/// A value with its band at a time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Banded {
    /// When, s of house time.
    pub at_s: f64,
    /// The value.
    pub value: f64,
    /// Lower end of the band.
    pub low: f64,
    /// Upper end of the band.
    pub high: f64,
}

/// What the picture of a course is made from.
#[derive(Clone, Debug, PartialEq)]
pub struct Course {
    /// What it shows.
    pub title: String,
    /// What a reader sees in it.
    pub description: String,
    /// The figure with its unit: `drift, ppm`.
    pub label: String,
    /// Name of the curve.
    pub name: &'static str,
    /// What was, in order of time.
    pub past: Vec<Banded>,
    /// Values of the past farther apart than this, s, have a silence between them.
    pub silence_s: f64,
    /// What is foreseen, in order of time.
    pub ahead: Vec<Banded>,
    /// The time shown, s of house time.
    pub shown: Stretch,
    /// A hard limit, both ways.
    pub limit: Option<f64>,
    /// When something happened, s of house time.
    pub happenings_s: Vec<f64>,
}

impl Course {
    /// Draws it. A band that leaves the picture is cut at its edge.
    pub fn draw(&self) -> Picture {
        let (low, high) = self.extent();
        let (across, up) = (
            Axis::house(self.shown.from_s, self.shown.to_s),
            Axis::even(&self.label, low, high),
        );
        let frame = Frame {
            title: self.title.clone(),
            description: self.description.clone(),
            key: self.key(),
            across: across.clone(),
            up: up.clone(),
        };
        frame.draw(|chart| self.paint(chart, &across, &up))
    }

    fn key(&self) -> Vec<(Ink, &'static str)> {
        let parts = [
            (true, (Ink::Slate, self.name)),
            (!self.ahead.is_empty(), (Ink::Amber, "foreseen")),
            (self.limit.is_some(), (Ink::Brick, "headroom")),
            (
                !self.happenings_s.is_empty(),
                (Ink::Text, "changes, ticks below"),
            ),
        ];
        let shown = parts.into_iter().filter(|(is_shown, _)| *is_shown);
        shown.map(|(_, part)| part).collect()
    }

    /// What is shown upwards: the limits; else all values, with room for bands of the usual width.
    fn extent(&self) -> (f64, f64) {
        if let Some(limit) = self.limit {
            return (-1.15 * limit, 1.15 * limit);
        }
        let mut halves: Vec<f64> = self.past.iter().map(|b| (b.high - b.low) / 2.0).collect();
        halves.sort_by(f64::total_cmp);
        let usual = halves.get(halves.len() / 2).copied().unwrap_or(0.0);
        // A beginning that was far off, while little was known, must not flatten all the rest.
        let known = self
            .past
            .iter()
            .filter(|b| (b.high - b.low) / 2.0 <= 4.0 * usual);
        let (low, high) = known.fold((f64::MAX, f64::MIN), |(low, high), b| {
            (low.min(b.value), high.max(b.value))
        });
        if low > high {
            return (-1.0, 1.0);
        }
        let room = 1.6 * usual + 0.05 * (high - low);
        (low - room, high + room)
    }

    fn paint(&self, chart: &mut Chart<'_>, across: &Axis, up: &Axis) -> Result<(), Unpaintable> {
        let place = |at_s: f64, value: f64| (across.place(at_s), up.place(value));
        for (banded, ink) in self.pieces() {
            let upper = banded.iter().map(|b| place(b.at_s, b.high));
            let lower = banded.iter().rev().map(|b| place(b.at_s, b.low));
            shape(chart, upper.chain(lower).collect(), ink, 0.22)?;
            let middle = banded.iter().map(|b| place(b.at_s, b.value));
            path(chart, middle.collect(), ink, 2.0)?;
        }
        let (bottom, top) = (chart.y_range().start, chart.y_range().end);
        for &at_s in &self.happenings_s {
            let x = across.place(at_s);
            line(
                chart,
                [(x, bottom), (x, bottom + 0.05 * (top - bottom))],
                stroke(Ink::Text, 1.2),
            )?;
        }
        for limit in self.limit.into_iter().flat_map(|limit| [-limit, limit]) {
            let ends = [self.shown.from_s, self.shown.to_s].map(|at_s| place(at_s, limit));
            dashed(chart, ends, stroke(Ink::Brick, 1.4))?;
        }
        if !self.ahead.is_empty() {
            let now = across.place(self.ahead[0].at_s);
            line(chart, [(now, bottom), (now, top)], stroke(Ink::Quiet, 1.0))?;
        }
        Ok(())
    }

    /// What is drawn in one stroke: the past between silences, and what is ahead.
    fn pieces(&self) -> impl Iterator<Item = (&[Banded], Ink)> {
        let joined = |a: &Banded, b: &Banded| b.at_s - a.at_s <= self.silence_s;
        let past = self.past.chunk_by(joined).map(|piece| (piece, Ink::Slate));
        past.chain([(self.ahead.as_slice(), Ink::Amber)])
            .filter(|(piece, _)| piece.len() > 1)
    }
}
