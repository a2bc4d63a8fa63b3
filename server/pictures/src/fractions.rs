//! The fractions around a target by size and error: why one of them was taken.

use plotters::element::Rectangle;

use crate::{
    Axis, Chart, Frame, Ink, Picture,
    brush::{Unpaintable, dashed, line, stroke, wash},
    mark::{Standing, Taken, beside, mark, ring},
};

/// A fraction L/M.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Neighbour {
    /// Output samples of a block.
    pub l: u64,
    /// Input samples of a block.
    pub m: u64,
    /// (L/M) / target − 1, dimensionless.
    pub residual: f64,
}

/// What the picture is made from. Residuals are against the target, which lies at 0.
#[derive(Clone, Debug, PartialEq)]
pub struct Fractions {
    /// What it shows.
    pub title: String,
    /// Fractions that the bounds allow.
    pub allowed: Vec<Neighbour>,
    /// The fractions that are run, or would be.
    pub run: Vec<Neighbour>,
    /// Largest M that the bounds allow, if they bound it.
    pub max_m: Option<u64>,
    /// Residuals of the two ends of a bracket: nothing that is allowed lies between them.
    pub gap: Option<(f64, f64)>,
    /// Residuals of the ends of the target's 95 % interval.
    pub interval: Option<(f64, f64)>,
    /// Residuals of the ends of the ratios that would hold.
    pub holding: Option<(f64, f64)>,
    /// Residual of the ratio that is wanted in the long run.
    pub wanted: Option<f64>,
}

/// A unit of residuals that fits a width.
fn unit(width: f64) -> (f64, &'static str) {
    match width {
        width if width < 2e-6 => (1e9, "ppb"),
        width if width < 2e-2 => (1e6, "ppm"),
        _ => (1e2, "%"),
    }
}

impl Fractions {
    /// Draws it.
    pub fn draw(&self) -> Picture {
        let (from, to) = self.window();
        let (factor, unit) = unit(to - from);
        let label = format!("off the target, {unit}");
        let across = Axis::even(&label, from * factor, to * factor);
        let up = Axis::even("size: M", 0.0, self.largest() * 1.12);
        let frame = Frame {
            title: self.title.clone(),
            description: self.description(factor, unit),
            key: self.key(),
            across: across.clone(),
            up: up.clone(),
        };
        let place = |residual: f64, m: f64| (across.place(residual * factor), up.place(m));
        frame.draw(|chart| self.paint(chart, (from, to), &place))
    }

    /// The residuals shown: the gap, or what holds, with a little more than as much again around it.
    fn window(&self) -> (f64, f64) {
        let ends = [self.gap, self.holding, self.interval]
            .into_iter()
            .flatten();
        let runs = self.run.iter().map(|n| (n.residual, n.residual));
        let seen = match self.gap {
            Some(gap) => runs.fold(gap, wider),
            None => ends.chain(runs).fold((0.0, 0.0), wider),
        };
        let (low, high) = (seen.0.min(0.0), seen.1.max(0.0));
        // Enough to see the fractions just beyond the gap, which next to 1/1 are as far apart as it is wide.
        let room = 1.15 * (high - low).max(1e-12);
        (low - room, high + room)
    }

    fn largest(&self) -> f64 {
        let sizes = self.allowed.iter().chain(&self.run).map(|n| n.m);
        sizes.chain(self.max_m).max().unwrap_or(1) as f64
    }

    fn key(&self) -> Vec<(Ink, &'static str)> {
        let parts = [
            (true, (Ink::Quiet, "allowed")),
            (!self.run.is_empty(), (Ink::Slate, "taken")),
            (self.gap.is_some(), (Ink::Amber, "gap")),
            (self.holding.is_some(), (Ink::Moss, "would hold")),
            (self.interval.is_some(), (Ink::Plum, "target, 95 %")),
        ];
        let shown = parts.into_iter().filter(|(is_shown, _)| *is_shown);
        shown.map(|(_, part)| part).collect()
    }

    fn description(&self, factor: f64, unit: &str) -> String {
        let said =
            |n: &Neighbour| format!("{}/{}, {:+.3} {unit} off", n.l, n.m, n.residual * factor);
        let taken: Vec<String> = self.run.iter().map(said).collect();
        let mut text = format!("Taken: {}.", taken.join(" and "));
        if let Some((low, high)) = self.gap {
            let (low, high) = (low * factor, high * factor);
            text += &format!(
                " Nothing within the bounds lies between {low:+.3} and {high:+.3} {unit}."
            );
        }
        if let Some((low, high)) = self.interval {
            let half = (high - low) / 2.0 * factor;
            text += &format!(" The target is known to within {half:.3} {unit} either way.");
        }
        text
    }

    fn paint(
        &self,
        chart: &mut Chart<'_>,
        (from, to): (f64, f64),
        place: &dyn Fn(f64, f64) -> (f64, f64),
    ) -> Result<(), Unpaintable> {
        let (bottom, top) = (chart.y_range().start, chart.y_range().end);
        let height = top - bottom;
        let column = |ends: (f64, f64), span: (f64, f64), ink: Ink, strength: f64| {
            let corners = [
                (place(ends.0, 1.0).0, bottom + span.0 * height),
                (place(ends.1, 1.0).0, bottom + span.1 * height),
            ];
            Rectangle::new(corners, wash(ink, strength))
        };
        let area = chart.plotting_area();
        if let Some(gap) = self.gap {
            area.draw(&column(gap, (0.0, 1.0), Ink::Amber, 0.16))?;
        }
        if let Some(holding) = self.holding {
            area.draw(&column(holding, (0.0, 1.0), Ink::Moss, 0.25))?;
        }
        if let Some(interval) = self.interval {
            area.draw(&column(interval, (0.0, 0.06), Ink::Plum, 0.8))?;
        }
        let target = place(0.0, 1.0).0;
        line(
            chart,
            [(target, bottom), (target, top)],
            stroke(Ink::Text, 1.0),
        )?;
        if let Some(max_m) = self.max_m {
            let ends = [from, to].map(|residual| place(residual, max_m as f64));
            dashed(chart, ends, stroke(Ink::Brick, 1.2))?;
        }
        let shown = |n: &&Neighbour| (from..=to).contains(&n.residual);
        for n in self.allowed.iter().filter(shown) {
            ring(chart, place(n.residual, n.m as f64), Ink::Quiet, 2.2)?;
        }
        if let Some(wanted) = self.wanted {
            let wanted = place(wanted, 1.0).0;
            dashed(
                chart,
                [(wanted, bottom), (wanted, top)],
                stroke(Ink::Slate, 1.4),
            )?;
        }
        self.name(chart, (from, to), place)
    }

    /// The fractions that are taken, with their names; then the simplest others, as there is room.
    fn name(
        &self,
        chart: &Chart<'_>,
        (from, to): (f64, f64),
        place: &dyn Fn(f64, f64) -> (f64, f64),
    ) -> Result<(), Unpaintable> {
        let mut taken = Taken::default();
        let mut name = |n: &Neighbour, ink: Ink| {
            let (at, text) = (place(n.residual, n.m as f64), format!("{}/{}", n.l, n.m));
            if !taken.take(chart, at, &text) {
                return Ok(());
            }
            let beyond = n.residual > from + 0.85 * (to - from);
            let aside = if beyond { -8.0 } else { 8.0 };
            // Clear of the line of the bound, near which most are.
            beside(chart, at, &text, (aside, 11.0), ink)
        };
        for n in &self.run {
            mark(chart, place(n.residual, n.m as f64), Standing::Sound, 5.0)?;
            name(n, Ink::Text)?;
        }
        let mut others: Vec<&Neighbour> = self.allowed.iter().collect();
        others.retain(|n| (from..=to).contains(&n.residual) && !self.run.contains(n));
        others.sort_by_key(|n| n.m);
        for n in others.into_iter().take(8) {
            name(n, Ink::Quiet)?;
        }
        Ok(())
    }
}

fn wider(seen: (f64, f64), ends: (f64, f64)) -> (f64, f64) {
    (seen.0.min(ends.0), seen.1.max(ends.1))
}
