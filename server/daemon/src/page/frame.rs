//! The page around what it shows.

use axum::{
    http::{StatusCode, header},
    response::{Html, IntoResponse, Response},
};
use maud::{DOCTYPE, Markup, html};
use ratewright_control::HouseNs;

use super::words;

/// Which of the places in the header a page belongs to.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Place {
    Facility,
    Crossings,
    Clocks,
    Planner,
    Elsewhere,
}

/// A page to be.
#[derive(Debug)]
pub(super) struct Leaf {
    /// What stands in the browser's title, after the program's name.
    pub(super) title: String,
    pub(super) place: Place,
    /// House time it speaks of; a page that has one renews itself.
    pub(super) as_of_ns: Option<HouseNs>,
    pub(super) body: Markup,
}

const PLACES: [(Place, &str, &str); 4] = [
    (Place::Facility, "/", "Facility"),
    (Place::Crossings, "/crossings", "Crossings"),
    (Place::Clocks, "/clocks", "Clocks"),
    (Place::Planner, "/plan", "Planner"),
];

impl IntoResponse for Leaf {
    fn into_response(self) -> Response {
        let headers = [
            (
                header::CONTENT_SECURITY_POLICY,
                "default-src 'none'; style-src 'self'; script-src 'self'; connect-src 'self'; \
                 img-src data:; base-uri 'none'; form-action 'self'; frame-ancestors 'none'",
            ),
            (header::CACHE_CONTROL, "no-store"),
            (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
            (header::REFERRER_POLICY, "no-referrer"),
        ];
        (headers, Html(self.markup().into_string())).into_response()
    }
}

impl Leaf {
    fn markup(&self) -> Markup {
        html! {
            (DOCTYPE)
            html lang="en" {
                head {
                    meta charset="utf-8";
                    meta name="viewport" content="width=device-width, initial-scale=1";
                    meta name="color-scheme" content="light dark";
                    title { "ratewright: " (self.title) }
                    link rel="icon" href="data:,";
                    link rel="stylesheet" href="/page.css";
                    @if self.as_of_ns.is_some() {
                        script src="/page.js" defer {}
                        noscript { meta http-equiv="refresh" content="10"; }
                    }
                }
                body {
                    a .skip href="#main" { "To the content" }
                    (self.header())
                    main #main tabindex="-1" {
                        (self.body)
                        @if let Some(house_ns) = self.as_of_ns {
                            p #stamp .stamp { "House time " (words::stamp(house_ns)) " (TAI)" }
                        }
                    }
                    (footer())
                }
            }
        }
    }

    fn header(&self) -> Markup {
        html! {
            header {
                p .name { "ratewright" }
                nav #places aria-label="Places" {
                    @for (place, address, name) in PLACES {
                        a href=(address) aria-current=[(place == self.place).then_some("page")] { (name) }
                    }
                }
                // Shown by the script that renews the page; without it there is nothing to hold.
                @if self.as_of_ns.is_some() {
                    button #hold type="button" hidden aria-pressed="false" { "Hold still" }
                }
            }
            p #contact role="status" {}
        }
    }
}

fn footer() -> Markup {
    html! {
        footer {
            p {
                strong { "Not a safety system. " }
                "Voice alarm and the like defer to local codes and licensed practice. "
                a href="/metrics" { "Metrics" }
            }
        }
    }
}

/// The style sheet: the pages' own, and that of the pictures.
pub(super) fn style_sheet() -> String {
    format!("{}{}", include_str!("page.css"), ratewright_pictures::STYLE)
}

/// Said where something cannot be that never should be so.
pub(super) const OF_THE_PROGRAM: &str = "the answer cannot be shown: a fault of this program";

/// A page that says what is not there.
pub(super) fn not_found(what: &str) -> Response {
    trouble(StatusCode::NOT_FOUND, "Not found", what)
}

/// A page that says why there is none.
pub(super) fn trouble(status: StatusCode, title: &str, why: &str) -> Response {
    let leaf = Leaf {
        title: title.to_owned(),
        place: Place::Elsewhere,
        as_of_ns: None,
        body: html! {
            h1 { (title) }
            p { (why) }
            p { a href="/" { "To the facility at a glance" } }
        },
    };
    (status, leaf).into_response()
}
