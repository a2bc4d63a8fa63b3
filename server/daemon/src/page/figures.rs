//! Pictures of what went on, from the board's chronicle.

use maud::{Markup, html};
use ratewright_control::{HouseNs, PhaseForecast};
use ratewright_pictures::{Banded, Course, Picture, Stretch};
use serde::Deserialize;

use super::words;
use crate::chronicle::{Happening, Point, Span};

const S: f64 = 1e-9;
/// Half-width of a 95 % interval of a normal variable, in standard deviations.
const Z95: f64 = 1.96;

/// Which span a page is asked for.
#[derive(Clone, Debug, Default, Deserialize)]
#[serde(default)]
pub(super) struct AskedSpan {
    span: String,
}

/// Points of the two hours, one a minute, of which fewer hardly show.
const SPLINTER: usize = 15;

const SPANS: [(Span, &str, &str); 3] = [
    (Span::Minutes, "minutes", "10 minutes"),
    (Span::Hours, "hours", "2 hours"),
    (Span::Day, "day", "1 day"),
];

impl AskedSpan {
    /// The span; anything that is none counts as the usual one, or as the shortest where `hours`, what is
    /// remembered of the last two, would be a splinter of that.
    pub(super) fn span(&self, hours: &[Point]) -> Span {
        let named = SPANS.iter().find(|(_, value, _)| *value == self.span);
        match named {
            Some((span, ..)) => *span,
            None if hours.len() < SPLINTER => Span::Minutes,
            None => Span::default(),
        }
    }

    /// Links to the same page with the other spans.
    pub(super) fn choice(chosen: Span) -> Markup {
        html! {
            nav #spans .choice aria-label="Time shown" {
                @for (span, value, name) in SPANS {
                    a href={ "?span=" (value) } aria-current=[(span == chosen).then_some("true")] { (name) }
                }
            }
        }
    }
}

/// The drift of a clock over a span.
pub(super) fn drift(points: &[Point], happened: &[Happening], span: Span, now: HouseNs) -> Picture {
    let ppm = |value: f64| value * 1e6;
    let past: Vec<Banded> = points.iter().map(|point| banded(point, ppm)).collect();
    let description = ends(&past).map_or_else(String::new, |(first, last)| {
        format!(
            "From {:+.4} to {:+.4} ppm; the 95 % band is now {:.4} ppm wide.",
            first.value,
            last.value,
            last.high - last.low
        )
    });
    Course {
        title: "Drift against house time".to_owned(),
        description,
        label: "drift, ppm".to_owned(),
        name: "drift, 95 %",
        past,
        silence_s: silence_s(span),
        ahead: Vec::new(),
        shown: back(span, now),
        limit: None,
        happenings_s: happened.iter().map(|h| h.at_ns as f64 * S).collect(),
    }
    .draw()
}

/// What a clock gained beyond a steady drift over a span: the drift less its mean, summed up.
pub(super) fn gained(points: &[Point], span: Span, now: HouseNs) -> Picture {
    let steps_s = points
        .windows(2)
        .map(|pair| (pair[1].at_ns - pair[0].at_ns) as f64 * S);
    let weighed = steps_s.clone().zip(points.windows(2));
    let area: f64 = weighed
        .map(|(step_s, pair)| step_s * (pair[0].value + pair[1].value) / 2.0)
        .sum();
    let mean = area / steps_s.sum::<f64>().max(S);
    let mut phase_us = 0.0;
    let mut past = Vec::with_capacity(points.len());
    let mut before: Option<&Point> = None;
    for point in points {
        if let Some(before) = before {
            let step_s = (point.at_ns - before.at_ns) as f64 * S;
            phase_us += 1e6 * step_s * ((point.value + before.value) / 2.0 - mean);
        }
        before = Some(point);
        let at_s = point.at_ns as f64 * S;
        past.push(Banded {
            at_s,
            value: phase_us,
            low: phase_us,
            high: phase_us,
        });
    }
    let most = past.iter().map(|b| b.value.abs()).fold(0.0, f64::max);
    Course {
        title: "Gained beyond a steady drift".to_owned(),
        description: format!(
            "What the clock gained on house time beyond its mean drift of {:+.4} ppm, at most {most:.3} \
             microseconds.",
            mean * 1e6
        ),
        label: "gained, µs".to_owned(),
        name: "gained",
        past,
        silence_s: silence_s(span),
        ahead: Vec::new(),
        shown: back(span, now),
        limit: None,
        happenings_s: Vec::new(),
    }
    .draw()
}

/// Times ahead at which a forecast is asked for, s: half as far as the span goes back, closer to
/// each other at first.
pub(super) fn ahead_s(span: Span) -> Vec<f64> {
    let far_s = span.length_ns() as f64 * S / 2.0;
    (0..=40)
        .map(|i| far_s * (f64::from(i) / 40.0).powi(2))
        .collect()
}

/// The phase error of a crossing over a span, and how it is foreseen to go on.
pub(super) fn phase(
    points: &[Point],
    forecast: Option<&PhaseForecast>,
    headroom_samples: f64,
    happened: &[Happening],
    (span, now): (Span, HouseNs),
) -> Picture {
    let now_s = now as f64 * S;
    let ahead: Vec<Banded> = forecast.map_or_else(Vec::new, |forecast| {
        let foreseen = forecast.points.iter().map(|point| Banded {
            at_s: now_s + point.after_s,
            value: point.phase_samples,
            low: point.phase_samples - Z95 * point.deviation_samples,
            high: point.phase_samples + Z95 * point.deviation_samples,
        });
        foreseen.collect()
    });
    let shown = Stretch {
        to_s: now_s + span.length_ns() as f64 * S / 2.0,
        ..back(span, now)
    };
    let past: Vec<Banded> = points
        .iter()
        .map(|point| banded(point, |samples| samples))
        .collect();
    let most = past.iter().map(|b| b.high.max(-b.low)).fold(0.0, f64::max);
    Course {
        title: "Phase error in its headroom, and what is ahead".to_owned(),
        description: format!(
            "The 95 % band of the phase error came as far as {most:.2} samples of {headroom_samples}; \
             to the right of the line is the forecast if nothing is measured or set anew."
        ),
        label: "phase error, sink samples".to_owned(),
        name: "phase error, 95 %",
        past,
        silence_s: silence_s(span),
        ahead,
        shown,
        limit: Some(headroom_samples),
        happenings_s: happened.iter().map(|h| h.at_ns as f64 * S).collect(),
    }
    .draw()
}

/// A picture over time, which opens where now is.
pub(super) fn course(id: &str, drawn: &Picture) -> Markup {
    html! { div .ends-now { (words::picture(id, drawn)) } }
}

fn banded(point: &Point, in_unit: impl Fn(f64) -> f64) -> Banded {
    Banded {
        at_s: point.at_ns as f64 * S,
        value: in_unit(point.value),
        low: in_unit(point.low),
        high: in_unit(point.high),
    }
}

fn ends(past: &[Banded]) -> Option<(&Banded, &Banded)> {
    past.first().zip(past.last())
}

/// Two spacings and a half: one that is missed is no silence yet.
fn silence_s(span: Span) -> f64 {
    2.5 * span.spacing_ns() as f64 * S
}

fn back(span: Span, now: HouseNs) -> Stretch {
    Stretch {
        from_s: (now - span.length_ns()) as f64 * S,
        to_s: now as f64 * S,
    }
}
