//! The crossings of the sample facility.

use ratewright_control::{CrossingDeclaration, Realisation};
use ratewright_ratio::Bounds;

use super::{S, id};

const DAY_S: i64 = 86_400;

pub(super) fn crossings() -> Vec<CrossingDeclaration> {
    let mut crossings = vec![
        crossing(
            "hall-stage-in",
            "Stage to desk",
            "hall-stage",
            "hall-desk",
            1024,
            48.0,
        ),
        crossing(
            "hall-programme",
            "Dance hall to the house",
            "hall-desk",
            "house-word",
            1024,
            48.0,
        ),
        crossing(
            "ferry-programme",
            "Ferry to the house",
            "ferry-desk",
            "house-word",
            1024,
            96.0,
        ),
        crossing(
            "ferry-return",
            "House to the ferry",
            "house-word",
            "ferry-desk",
            1024,
            96.0,
        ),
        crossing(
            "ferry-intercom",
            "Ferry talkback",
            "ferry-talkback",
            "house-word",
            1024,
            96.0,
        ),
        crossing(
            "news-programme",
            "News to the house",
            "news-desk",
            "house-word",
            1024,
            24.0,
        ),
        crossing(
            "news-return",
            "House to the news",
            "house-word",
            "news-desk",
            1024,
            24.0,
        ),
        crossing(
            "shellac",
            "Gramophone to the house",
            "gramophone",
            "house-word",
            1024,
            48.0,
        ),
        crossing(
            "film",
            "Film sound to the house",
            "film-sound",
            "house-word",
            2048,
            48.0,
        ),
        crossing(
            "web",
            "House to the web stream",
            "house-word",
            "web-stream",
            8192,
            64.0,
        ),
        crossing(
            "guest-conversion",
            "Pictures from abroad to ours",
            "guest-pictures",
            "picture-lock",
            2048,
            1.0,
        ),
        crossing(
            "dish-remap",
            "Dish to the multiplexer",
            "dish",
            "multiplex",
            4096,
            27_000.0,
        ),
    ];
    for crossing in &mut crossings {
        let group = ["hall", "ferry"]
            .into_iter()
            .find(|group| crossing.id.as_str().starts_with(group));
        crossing.group = group.map(id);
        if crossing.id.as_str() == "web" {
            crossing.realisation = Realisation::Single;
        }
    }
    crossings
}

fn crossing(
    name: &str,
    title: &str,
    source: &str,
    sink: &str,
    bound: u64,
    headroom_samples: f64,
) -> CrossingDeclaration {
    let bounds = Bounds::new(bound, bound).expect("the bounds of the sample facility are positive");
    CrossingDeclaration {
        display_name: title.to_owned(),
        headroom_samples,
        lead_ns: S,
        review_horizon_ns: DAY_S * S,
        ..CrossingDeclaration::new(id(name), id(source), id(sink), bounds)
    }
}
