//! Stability statistics over the interval, beside published limits.

use crate::{
    Axis, Chart, Frame, Ink, Picture,
    brush::{Unpaintable, dashed, stroke},
    mark::{Standing, beside, mark, path},
};

/// A statistic of a clock by the interval.
#[derive(Clone, Debug, PartialEq)]
pub struct Steadiness {
    /// What it shows.
    pub title: String,
    /// The statistic with its unit: `time deviation, ns`.
    pub label: &'static str,
    /// Interval, s, and value, in rising order of the interval.
    pub values: Vec<(f64, f64)>,
    /// Published limits.
    pub limits: Vec<Limit>,
}

/// A published limit.
#[derive(Clone, Debug, PartialEq)]
pub struct Limit {
    /// A short name for it.
    pub name: String,
    /// Interval, s, and limit, in rising order of the interval.
    pub values: Vec<(f64, f64)>,
}

impl Steadiness {
    /// Draws it. Values of 0 are left out: there is no place for them among powers of ten.
    pub fn draw(&self) -> Picture {
        let all = self
            .limits
            .iter()
            .flat_map(|limit| &limit.values)
            .chain(&self.values);
        let ends = |of: fn(&(f64, f64)) -> f64| {
            let values = all.clone().map(of).filter(|&value| value > 0.0);
            values.fold((f64::MAX, f64::MIN), |(low, high), v| {
                (low.min(v), high.max(v))
            })
        };
        let (tau, value) = (ends(|at| at.0), ends(|at| at.1));
        let across = Axis::decades("interval, s", tau.0 * 0.8, tau.1 * 1.3);
        let up = Axis::decades(self.label, value.0 * 0.6, value.1 * 1.6);
        let mut key = vec![(Ink::Slate, "this clock")];
        key.extend((!self.limits.is_empty()).then_some((Ink::Brick, "published limit")));
        let frame = Frame {
            title: self.title.clone(),
            description: self.description(),
            key,
            across: across.clone(),
            up: up.clone(),
        };
        frame.draw(|chart| self.paint(chart, &|(tau, v)| (across.place(tau), up.place(v))))
    }

    fn description(&self) -> String {
        let said = |&(tau_s, value): &(f64, f64)| format!("{value:.3e} over {tau_s} s");
        let values: Vec<String> = self.values.iter().map(said).collect();
        format!("{}: {}.", self.label, values.join(", "))
    }

    fn paint(
        &self,
        chart: &mut Chart<'_>,
        place: &dyn Fn((f64, f64)) -> (f64, f64),
    ) -> Result<(), Unpaintable> {
        for limit in &self.limits {
            for pair in limit.values.windows(2) {
                dashed(
                    chart,
                    [place(pair[0]), place(pair[1])],
                    stroke(Ink::Brick, 1.4),
                )?;
            }
            if let Some(&first) = limit.values.first() {
                beside(chart, place(first), &limit.name, (4.0, -9.0), Ink::Brick)?;
            }
        }
        let seen = self.values.iter().filter(|(_, value)| *value > 0.0);
        let places: Vec<_> = seen.map(|&at| place(at)).collect();
        for &at in &places {
            mark(chart, at, Standing::Sound, 3.5)?;
        }
        path(chart, places, Ink::Slate, 1.6)
    }
}
