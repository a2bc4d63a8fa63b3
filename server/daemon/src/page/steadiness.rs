//! How steady a clock is: deviations over the interval, beside published limits.

use maud::{Markup, html};
use ratewright_pictures::{Limit, Steadiness};
use ratewright_timing::stability::{MASKS, Mask, OctaveFigures, PowerLaw, identify};

use super::words;

/// Points of a limit that are drawn a decade.
const A_DECADE: i32 = 8;

/// The section of a clock; `is_kept` tells if it is declared with statistics.
pub(super) fn section(is_kept: bool, figures: &[OctaveFigures]) -> Markup {
    html! {
        section #steadiness aria-labelledby="steadiness-head" {
            h2 #steadiness-head { "How steady it is" }
            @if !is_kept {
                p .calm { "No stability statistics are kept of this clock: declare it with " code { "statistics" } " to have them." }
            } @else if figures.len() < 3 {
                p .calm { "Too little was seen since its readings began or were last interrupted." }
            } @else {
                (shown(figures))
            }
        }
    }
}

fn shown(figures: &[OctaveFigures]) -> Markup {
    let allan = of(figures, |f| f.allan);
    let time = of(figures, |f| f.time_s.map(|s| s * 1e9));
    let mtie = of(figures, |f| f.mtie_s.map(|s| s * 1e9));
    html! {
        p .note {
            "Of the estimated phase, every 10 s. At intervals shorter than the \
             estimator averages over, this says how smooth the estimate is rather than how steady the clock. \
             No limit is a demand on this clock: they are there to compare with."
        }
        @if let Some(law) = law(figures) { p #noise { (law) } }
        (words::picture("time-deviation", &picture("Time deviation", "time deviation, ns", time, limits(true))))
        (words::picture("interval-error", &picture("Maximum time interval error", "MTIE, ns", mtie, limits(false))))
        (words::picture("allan-deviation", &picture("Allan deviation", "Allan deviation", allan, Vec::new())))
        (table(figures))
        ul .plain {
            @for mask in &MASKS { li { (letter(mask)) ": " (mask.name) ", " (mask.source) "." } }
        }
    }
}

fn of(figures: &[OctaveFigures], value: impl Fn(&OctaveFigures) -> Option<f64>) -> Vec<(f64, f64)> {
    figures
        .iter()
        .filter_map(|f| Some((f.tau_s, value(f)?)))
        .collect()
}

fn picture(
    title: &str,
    label: &'static str,
    values: Vec<(f64, f64)>,
    limits: Vec<Limit>,
) -> ratewright_pictures::Picture {
    Steadiness {
        title: title.to_owned(),
        label,
        values,
        limits,
    }
    .draw()
}

fn limits(of_tdev: bool) -> Vec<Limit> {
    let fitting = MASKS.iter().filter(|mask| mask.limits_tdev == of_tdev);
    fitting.map(limit).collect()
}

/// What a mask is called in a picture.
fn letter(mask: &Mask) -> char {
    let place = MASKS.iter().position(|other| other == mask).unwrap_or(0);
    char::from(b'A' + place as u8)
}

fn limit(mask: &Mask) -> Limit {
    let (first, last) = (mask.segments.first(), mask.segments.last());
    let ends = first
        .zip(last)
        .map(|(first, last)| (first.from_s.max(1.0), last.to_s));
    let (from_s, to_s) = ends.unwrap_or((1.0, 1.0));
    let steps = (A_DECADE as f64 * (to_s / from_s).log10()).round() as i32;
    let tau_s = |i: i32| (from_s * 10_f64.powf(f64::from(i) / f64::from(A_DECADE))).min(to_s);
    let values = (0..=steps).filter_map(|i| Some((tau_s(i), mask.limit_ns(tau_s(i))?)));
    Limit {
        name: letter(mask).to_string(),
        values: values.collect(),
    }
}

/// The noise by its slope between the two longest intervals that were seen well enough.
fn law(figures: &[OctaveFigures]) -> Option<Markup> {
    let seen: Vec<(f64, f64)> = of(figures, |f| f.modified_allan);
    let [.., short, long, _] = seen.as_slice() else {
        return None;
    };
    let (law, slope) = identify(*short, *long)?;
    let name = match law {
        PowerLaw::WhitePhase => "white noise of the phase",
        PowerLaw::FlickerPhase => "flicker noise of the phase",
        PowerLaw::WhiteFrequency => "white noise of the frequency",
        PowerLaw::FlickerFrequency => "flicker noise of the frequency",
        PowerLaw::RandomWalkFrequency => "a random walk of the frequency",
    };
    Some(html! {
        "From " (words::span(short.0)) " to " (words::span(long.0)) " it looks like " (name)
        " (the modified Allan deviation goes as the interval to the power of " (format!("{slope:.1}")) ")."
    })
}

fn table(figures: &[OctaveFigures]) -> Markup {
    let cell =
        |value: Option<f64>| value.map_or("\u{2014}".to_owned(), |value| format!("{value:.2e}"));
    let time = |value: Option<f64>| value.map_or("\u{2014}".to_owned(), words::seconds);
    html! {
        details {
            summary { "In figures" }
            table role="table" {
                caption { "Deviations by NIST SP 1065, MTIE by ITU-T G.810." }
                thead role="rowgroup" {
                    tr role="row" {
                        th role="columnheader" scope="col" { "Interval" }
                        th role="columnheader" scope="col" .number { "Allan" }
                        th role="columnheader" scope="col" .number { "Modified Allan" }
                        th role="columnheader" scope="col" .number { "Hadamard" }
                        th role="columnheader" scope="col" .number { "Time deviation" }
                        th role="columnheader" scope="col" .number { "MTIE" }
                    }
                }
                tbody role="rowgroup" {
                    @for f in figures {
                        tr role="row" {
                            th role="rowheader" scope="row" { (words::span(f.tau_s)) }
                            td role="cell" data-head="Allan" .number { (cell(f.allan)) }
                            td role="cell" data-head="Modified Allan" .number { (cell(f.modified_allan)) }
                            td role="cell" data-head="Hadamard" .number { (cell(f.hadamard)) }
                            td role="cell" data-head="Time deviation" .number { (time(f.time_s)) }
                            td role="cell" data-head="MTIE" .number { (time(f.mtie_s)) }
                        }
                    }
                }
            }
        }
    }
}
