//! The planner.

use super::*;

fn rig() -> Rig {
    Rig::of(Engine::new(1))
}

#[tokio::test]
async fn a_plan_is_in_its_address() {
    let page = rig()
        .page("/plan?from=44.1k&to=48k&max_l=256&max_m=256")
        .await;
    // 48000/44100 in lowest terms.
    place(from(&page, "nearest"), "160/147");
    place(from(&page, "nearest"), "nothing: it is exact");
    place(from(&page, "ladder"), "160/147, exact");
    // What was asked stands in the form again.
    place(&page, "name=\"from\" value=\"44.1k\"");
    assert!(
        !page.contains("id=\"cadence\""),
        "an exact ratio needs no second one"
    );
}

#[tokio::test]
async fn a_drift_brings_the_gap_two_ratios_and_the_simplest_within_it() {
    let path =
        "/plan?from=44.1k&to=48k&from_drift=-12.5&from_width=2&headroom=4&passband=20000&frames=25";
    let page = rig().page(path).await;
    place(
        from(&page, "nearest"),
        "Nothing within the bounds lies between",
    );
    place(
        from(&page, "fractions"),
        "<title>The fractions around the target</title>",
    );
    place(
        from(&page, "simplest"),
        "The simplest ratio within what is known of the drifts is",
    );
    place(from(&page, "cadence"), "average the target exactly");
    place(from(&page, "turns-picture"), "blocks from the start");
    place(from(&page, "stages"), "Kaiser");
    // 44100 and 48000 over 25.
    place(from(&page, "frames-answer"), "1764");
    place(from(&page, "frames-answer"), "1920");
}

/// 44.1 kHz into 48 kHz at +12 ppm: 160/147 · 1.000012 in lowest terms is 500006/459375.
#[tokio::test]
async fn what_the_bounds_leave_and_what_it_costs_is_told() {
    let path = "/plan?from=44.1k&to=48k&to_drift=12&to_width=1&max_l=512&max_m=640&headroom=48";
    let page = rig().page(path).await;
    place(from(&page, "nearest"), "500006/459375");
    // 160 + 443 = 603 is above the 512 that the bounds leave, as are 603 phases of one table.
    place(from(&page, "simplest"), "603/554");
    place(from(&page, "simplest"), "which is beyond the bounds");
    place(from(&page, "stepping"), "512 phases");
    place(from(&page, "stepping"), "never off by more than 0.00107");
    place(
        from(&page, "cadence"),
        "Both tables are in memory: 603 phases",
    );
    place(from(&page, "cadence"), "never off by more than 0.00171");
    // 48 samples at 1 ppm of 48 kHz are 1000 s.
    place(from(&page, "cadence"), "16 min 40 s with an average");
    place(from(&page, "lazy"), "off by up to 12.0 output samples");
    // 0.0017 / 48000 s: 20 log10(pi * 20e3 * 35.5e-9) = -53.
    place(from(&page, "cadence"), "\u{2212}53 dB");
}

#[tokio::test]
async fn faults_are_told_beside_their_fields_all_at_once() {
    let path = "/plan?from=fast&to=48k&max_l=-3&from_drift=20000&headroom=x";
    let (status, _, page) = rig().answer(path).await;
    assert_eq!(status, StatusCode::BAD_REQUEST);
    place(&page, "4 of the fields below are not as accepted");
    place(from(&page, "from-fault"), "fast: ");
    place(
        from(&page, "max_l-fault"),
        "-3: accepted is a whole number from 1 on",
    );
    place(
        from(&page, "from_drift-fault"),
        "20000: accepted is -10000 to 10000 ppm",
    );
    place(from(&page, "headroom-fault"), "x: accepted is a number");
    assert_eq!(page.matches("aria-invalid=\"true\"").count(), 4);
    place(&page, "aria-describedby=\"from-hint from-fault\"");
    assert!(!page.contains("id=\"nearest\""));
}

/// What only the sum can tell is told by its field too.
#[tokio::test]
async fn faults_of_the_sum_are_told_beside_their_fields() {
    let cases = [
        ("max_m=9999999999", "max_m-fault"),
        ("prime=1", "prime-fault"),
        ("headroom=-1", "headroom-fault"),
        ("passband=30000", "passband-fault"),
        ("passband=1000&attenuation=500", "attenuation-fault"),
        ("phases=1", "phases-fault"),
        ("from_width=-1", "from_width-fault"),
    ];
    for (asked, fault) in cases {
        let (status, _, page) = rig()
            .answer(&format!("/plan?from=44.1k&to=48k&{asked}"))
            .await;
        assert_eq!(status, StatusCode::BAD_REQUEST, "{asked}");
        place(&page, &format!("id=\"{fault}\""));
    }
}

#[tokio::test]
async fn without_a_question_there_is_an_example() {
    let page = rig().page("/plan").await;
    place(&page, "This is an example");
    place(&page, "id=\"nearest\"");
}
