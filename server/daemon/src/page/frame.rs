//! The page around the tables.

use std::sync::Arc;

use maud::{DOCTYPE, Markup, html};
use ratewright_control::HouseNs;

use super::{attention, clocks, crossings};
use crate::board::{ClockView, CrossingView};

/// Rows that a table shows at most, the worst; the headline and the list speak of all.
const ROWS: usize = 1_000;

pub(super) fn page(
    house_ns: HouseNs,
    crossings: &[Arc<CrossingView>],
    clocks: &[Arc<ClockView>],
) -> Markup {
    html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light dark";
                title { "ratewright: " (attention::headline(crossings, clocks)) }
                link rel="icon" href="data:,";
                link rel="stylesheet" href="/page.css";
                script src="/page.js" defer {}
                noscript { meta http-equiv="refresh" content="10"; }
            }
            body {
                (header())
                main id="status" {
                    h1 { (sentence(&attention::headline(crossings, clocks))) }
                    (attention::list(crossings, clocks, house_ns))
                    section aria-labelledby="crossings" {
                        h2 id="crossings" { "Crossings" }
                        (crossings::table(&crossings[..crossings.len().min(ROWS)]))
                        (left_out(crossings.len(), "crossings"))
                    }
                    section aria-labelledby="clocks" {
                        h2 id="clocks" { "Clocks" }
                        (clocks::table(&clocks[..clocks.len().min(ROWS)], house_ns))
                        (left_out(clocks.len(), "clocks"))
                    }
                    p .stamp { "House time " (stamp(house_ns)) " (TAI)" }
                }
                (footer())
            }
        }
    }
}

fn left_out(all: usize, what: &str) -> Markup {
    html! {
        @if all > ROWS {
            p { (all - ROWS) " more " (what) " stand better than these and are left out." }
        }
    }
}

fn header() -> Markup {
    html! {
        header {
            p .name { "ratewright" }
            nav aria-label="Sections" {
                a href="#crossings" { "Crossings" }
                a href="#clocks" { "Clocks" }
                a href="/metrics" { "Metrics" }
            }
            // Shown by the script that renews the page; without it there is nothing to pause.
            button #pause type="button" hidden aria-pressed="false" { "Hold still" }
        }
    }
}

fn footer() -> Markup {
    html! {
        footer {
            p {
                strong { "Not a safety system. " }
                "Voice alarm and the like defer to local codes and licensed practice."
            }
        }
    }
}

fn sentence(text: &str) -> String {
    let mut chars = text.chars();
    chars.next().map_or_else(String::new, |first| {
        first.to_uppercase().chain(chars).collect()
    })
}

/// House time as date and time of day on its own scale.
fn stamp(house_ns: HouseNs) -> String {
    let seconds = house_ns.div_euclid(1_000_000_000);
    let (days, of_day) = (seconds.div_euclid(86_400), seconds.rem_euclid(86_400));
    let (year, month, day) = civil(days);
    let (h, m, s) = (of_day / 3_600, of_day % 3_600 / 60, of_day % 60);
    format!("{year:04}-{month:02}-{day:02} {h:02}:{m:02}:{s:02}")
}

/// The Gregorian date of a count of days since 1970-01-01.
fn civil(days: i64) -> (i64, i64, i64) {
    let leap = |year: i64| year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    let (mut year, mut left) = (1970, days);
    while left >= 365 + i64::from(leap(year)) {
        left -= 365 + i64::from(leap(year));
        year += 1;
    }
    let lengths = [
        31,
        28 + i64::from(leap(year)),
        31,
        30,
        31,
        30,
        31,
        31,
        30,
        31,
        30,
        31,
    ];
    let mut month = 1;
    for length in lengths {
        if left < length {
            break;
        }
        left -= length;
        month += 1;
    }
    (year, month, left + 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Dates from the calendar.
    #[test]
    fn house_time_reads_as_a_date() {
        let at = |seconds: i64| stamp(seconds * 1_000_000_000);
        assert_eq!(at(0), "1970-01-01 00:00:00");
        assert_eq!(at(951_782_400 + 86_399), "2000-02-29 23:59:59");
        assert_eq!(at(1_767_225_600 - 1), "2025-12-31 23:59:59");
        assert_eq!(at(1_767_225_600), "2026-01-01 00:00:00");
    }
}
