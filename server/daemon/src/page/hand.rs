//! What operators did to a crossing: who, when, what and why.

use maud::{Markup, html};
use ratewright_control::HouseNs;
use ratewright_proto::v1::{self, act::What};

use super::words;

/// Acts told on the page of their crossing.
pub(super) const SHOWN: usize = 20;

/// The newest acts; nothing where nobody has acted.
pub(super) fn section(acts: &[(i64, v1::Act)], now: HouseNs) -> Markup {
    if acts.is_empty() {
        return html! {};
    }
    html! {
        section #by-hand aria-labelledby="by-hand-head" {
            h2 #by-hand-head { "By hand" }
            ol .changes {
                @for (_, act) in acts {
                    li {
                        time title=(words::stamp(act.at_ns)) { (words::ago(act.at_ns, now)) } " "
                        span { (told(act)) }
                    }
                }
            }
        }
    }
}

/// What was done, by whom and why.
pub(super) fn told(act: &v1::Act) -> Markup {
    html! {
        (what(act)) " by " (act.by) @if !act.note.is_empty() { ": \u{201c}" (act.note) "\u{201d}" }
    }
}

fn what(act: &v1::Act) -> Markup {
    match &act.what {
        Some(What::Pinned(_)) => html! { "pinned" },
        Some(What::Released(_)) => html! { "released" },
        Some(What::ChangedOver(change)) => html! {
            "changed over from " (clock(&change.from_clock)) " to " (clock(&change.to_clock))
        },
        None => html! { "something that this version cannot name" },
    }
}

fn clock(name: &str) -> Markup {
    html! { a href={ "/" (name) } { (name.trim_start_matches("clocks/")) } }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn act(at_ns: i64, note: &str, what: What) -> (i64, v1::Act) {
        let act = v1::Act {
            crossing: "crossings/desk-to-stage".into(),
            by: "night <shift>".into(),
            note: note.into(),
            at_ns,
            what: Some(what),
        };
        (at_ns, act)
    }

    #[test]
    fn who_did_what_and_why_is_told() {
        let change = What::ChangedOver(v1::ChangedOver {
            from_clock: "clocks/desk".into(),
            to_clock: "clocks/spare".into(),
        });
        let acts = [
            act(60_000_000_000, "desk is dead", change),
            act(0, "", What::Pinned(v1::Pinned {})),
        ];
        let told = section(&acts, 120_000_000_000).into_string();
        assert!(told.contains("1 min 00 s ago"), "{told}");
        assert!(told.contains(r#"from <a href="/clocks/desk">desk</a> to <a href="/clocks/spare">spare</a> by night &lt;shift&gt;: “desk is dead”"#), "{told}");
        assert!(
            told.contains("pinned by night &lt;shift&gt;</span>"),
            "{told}"
        );
    }

    #[test]
    fn nothing_is_said_where_nobody_acted() {
        assert_eq!(section(&[], 0).into_string(), "");
    }
}
