//! What the pictures of clocks, crossings and plans show, read from the SVG.

use ratewright_pictures::{
    Banded, Course, Fractions, Ink, Limit, Nearness, Neighbour, Picture, Standing, Steadiness,
    Stretch, Turns, ladder,
};

fn count(picture: &Picture, element: &str, ink: Ink) -> usize {
    let colour = format!("#{:06X}", ink.light());
    let svg = picture.inline();
    svg.split(&format!("<{element} "))
        .skip(1)
        .filter(|rest| {
            rest.split("/>")
                .next()
                .is_some_and(|one| one.contains(&colour))
        })
        .count()
}

fn texts(picture: &Picture) -> Vec<String> {
    let svg = picture.inline();
    let texts = svg.split("<text ").skip(1);
    let inner = texts.filter_map(|rest| rest.split_once('>')?.1.split("</text>").next());
    inner.map(|text| text.trim().to_owned()).collect()
}

fn says(picture: &Picture, text: &str) -> bool {
    texts(picture).iter().any(|said| said == text)
}

fn course(past: Vec<Banded>) -> Course {
    Course {
        title: "Drift".to_owned(),
        description: String::new(),
        label: "drift, ppm".to_owned(),
        name: "drift",
        past,
        silence_s: 25.0,
        ahead: Vec::new(),
        shown: Stretch {
            from_s: 0.0,
            to_s: 1_000.0,
        },
        limit: None,
        happenings_s: vec![500.0],
    }
}

fn at(at_s: f64, value: f64, half: f64) -> Banded {
    Banded {
        at_s,
        value,
        low: value - half,
        high: value + half,
    }
}

#[test]
fn a_silence_breaks_the_curve_and_its_band() {
    let times = (0..30)
        .chain(60..100)
        .map(|i| at(10.0 * f64::from(i), 1.0, 0.1));
    let picture = course(times.collect()).draw();
    assert_eq!(count(&picture, "polygon", Ink::Slate), 2);
    // Two curves and the stroke of the key.
    assert_eq!(count(&picture, "polyline", Ink::Slate), 3);
}

#[test]
fn a_wild_beginning_does_not_flatten_the_rest() {
    let settling = (0..100).map(|i| match i {
        0..5 => at(10.0 * f64::from(i), 80.0, 60.0),
        _ => at(10.0 * f64::from(i), 12.5, 0.01),
    });
    let picture = course(settling.collect()).draw();
    let numbers = texts(&picture)
        .into_iter()
        .filter_map(|text| text.parse::<f64>().ok());
    let marks: Vec<f64> = numbers.filter(|mark| (11.0..14.0).contains(mark)).collect();
    assert!(
        marks.len() >= 3,
        "the marks lie around 12.5 ppm: {:?}",
        texts(&picture)
    );
}

#[test]
fn limits_and_what_is_ahead_are_drawn_within_the_picture() {
    let ahead = (0..50).map(|i| at(500.0 + 10.0 * f64::from(i), f64::from(i), f64::from(i)));
    let crossing = Course {
        ahead: ahead.collect(),
        limit: Some(24.0),
        ..course((0..50).map(|i| at(10.0 * f64::from(i), 0.0, 1.0)).collect())
    };
    let picture = crossing.draw();
    assert_eq!(count(&picture, "polygon", Ink::Amber), 1);
    assert!(
        count(&picture, "polyline", Ink::Brick) > 20,
        "dashes of two limits"
    );
    // The band leaves the headroom and is cut at the plot's edge: 62 to 276 px down, ten units each.
    let svg = picture.inline();
    let points = svg
        .split("points=\"")
        .skip(1)
        .filter_map(|rest| rest.split('"').next());
    for point in points.flat_map(str::split_whitespace) {
        let (_, y) = point.split_once(',').expect("a pair");
        let y: f64 = y.parse().expect("a number");
        assert!((400.0..=2_761.0).contains(&y), "{y}");
    }
}

fn fractions() -> Fractions {
    let near = |l: u64, m: u64| Neighbour {
        l,
        m,
        residual: l as f64 / m as f64 / 1.0884 - 1.0,
    };
    Fractions {
        title: "Around".to_owned(),
        allowed: vec![near(160, 147), near(357, 328), near(197, 181), near(1, 1)],
        run: vec![near(160, 147), near(357, 328)],
        max_m: Some(400),
        gap: Some((near(160, 147).residual, near(357, 328).residual)),
        interval: Some((-1e-7, 1e-7)),
        holding: None,
        wanted: Some(1e-8),
    }
}

#[test]
fn the_fractions_that_are_run_bear_their_names_and_far_ones_are_left_out() {
    let picture = fractions().draw();
    assert!(says(&picture, "160/147") && says(&picture, "357/328"));
    assert!(!says(&picture, "1/1"), "8 % off is far out of the picture");
    assert_eq!(count(&picture, "rect", Ink::Amber), 1, "the gap");
    assert_eq!(
        count(&picture, "rect", Ink::Plum),
        1,
        "the target's interval"
    );
    assert!(picture.inline().contains("<desc>Taken: 160/147, "));
}

#[test]
fn an_exact_ratio_alone_still_has_a_picture() {
    let exact = Neighbour {
        l: 160,
        m: 147,
        residual: 0.0,
    };
    let alone = Fractions {
        allowed: vec![exact],
        run: vec![exact],
        gap: Some((0.0, 0.0)),
        interval: None,
        wanted: None,
        ..fractions()
    };
    assert!(says(&alone.draw(), "160/147"));
}

#[test]
fn the_troubled_and_the_nearest_are_named() {
    let near = |i: u32, standing, seconds_to_slip| Nearness {
        name: format!("crossing {i}"),
        standing,
        seconds_to_slip,
        used: f64::from(i % 10) / 10.0,
    };
    let mut crossings = vec![near(0, Standing::Adrift, Some(5.0))];
    crossings.extend((1..5_000).map(|i| near(i, Standing::Sound, Some(1_000.0 + f64::from(i)))));
    crossings.push(near(9_999, Standing::Sound, None));
    let picture = Nearness::draw(&crossings);
    assert!(says(&picture, "crossing 0") && says(&picture, "crossing 1"));
    assert!(!says(&picture, "crossing 400"));
    assert_eq!(count(&picture, "polygon", Ink::Brick), 1, "one lozenge");
    assert!(count(&picture, "circle", Ink::Slate) < 1_000);
    assert!(picture.inline().contains("5001 crossings"));
}

#[test]
fn a_ladder_goes_down_to_what_is_exact() {
    let rung = |l, m, residual| Neighbour { l, m, residual };
    let rungs = [rung(1, 1, -0.08), rung(12, 11, 2e-3), rung(160, 147, 0.0)];
    let picture = ladder(&rungs);
    for text in ["1/1", "12/11", "160/147, exact"] {
        assert!(says(&picture, text), "{text}: {:?}", texts(&picture));
    }
    assert!(
        !texts(&ladder(&[])).is_empty(),
        "no rung, and still a frame"
    );
}

#[test]
fn each_block_of_the_higher_ratio_has_a_tick() {
    let blocks = (0..20).map(|i| (i % 4 == 0, 0.01 * f64::from(i % 4)));
    let turns = Turns {
        blocks: blocks.collect(),
        bound_samples: 0.05,
        ratios: ["160/147".to_owned(), "357/328".to_owned()],
    };
    // Five ticks and the stroke of the key.
    assert_eq!(count(&turns.draw(), "polyline", Ink::Amber), 6);
}

#[test]
fn steadiness_is_drawn_beside_its_limits() {
    let steadiness = Steadiness {
        title: "Time deviation".to_owned(),
        label: "time deviation, ns",
        values: vec![(1.0, 0.0), (2.0, 3.0), (4.0, 5.0)],
        limits: vec![Limit {
            name: "A".to_owned(),
            values: vec![(1.0, 3.2), (1_000.0, 6.4)],
        }],
    };
    let picture = steadiness.draw();
    assert!(says(&picture, "A"));
    assert_eq!(
        count(&picture, "circle", Ink::Slate),
        2,
        "nothing has a place at 0"
    );
    let empty = Steadiness {
        values: Vec::new(),
        limits: Vec::new(),
        ..steadiness
    };
    assert!(empty.draw().inline().contains("</svg>"));
}
