//! One clock, one crossing, one setting.

use super::*;

#[tokio::test]
async fn a_clock_tells_its_drift_its_probes_and_what_rests_on_it() {
    let rig = Rig::sample(900);
    let page = rig.page("/clocks/hall-desk").await;
    let view = rig
        .sources
        .board
        .clock(&Id::new("hall-desk").expect("an id"))
        .expect("declared");
    place(from(&page, "state"), "locked");
    place(
        from(&page, "figures"),
        &words::ppm(view.estimate.estimate.drift),
    );
    let drawn = from(&page, "drift-picture");
    place(drawn, "<title>Drift against house time</title>");
    place(drawn, "<title>Gained beyond a steady drift</title>");
    // Who reads it, against what, and how well.
    let probes = from(&page, "probes");
    let links = rig.sources.desk.ask(|engine| {
        let id = Id::new("hall-desk").expect("an id");
        engine.links(&id, 0).expect("declared")
    });
    let links = links.await.expect("the desk answers");
    place(probes, &links[0].probe);
    place(probes, "counts");
    place(probes, "worth");
    place(from(&page, "users"), "/crossings/");
    // Other spans of time are a link away.
    place(&page, "href=\"?span=minutes\"");
    assert!(
        rig.page("/clocks/hall-desk?span=day")
            .await
            .contains("Drift over time")
    );
    // A clock that is house time has no drift and no probes.
    let house = rig.page("/clocks/house-word").await;
    place(&house, "0 by definition");
    place(&house, "it is house time by definition");
}

#[tokio::test]
async fn statistics_are_shown_of_the_clocks_that_are_declared_so() {
    let plain = Rig::sample(60).page("/clocks/hall-desk").await;
    place(
        from(&plain, "steadiness"),
        "No stability statistics are kept",
    );
    let mut plan = sample::plan();
    let desk = plan
        .devices
        .iter_mut()
        .find(|device| device.clock.id.as_str() == "hall-desk");
    desk.expect("it is in the plan").clock.statistics = true;
    let page = Rig::playing(plan, 600).page("/clocks/hall-desk").await;
    let section = from(&page, "steadiness");
    for title in [
        "Time deviation",
        "Maximum time interval error",
        "Allan deviation",
    ] {
        place(section, &format!("<title>{title}</title>"));
    }
    place(section, "ITU-T G.8262");
    place(section, "NIST SP 1065");
}

#[tokio::test]
async fn a_crossing_tells_its_target_its_phase_error_and_why_its_ratio() {
    let rig = Rig::sample(900);
    let view = rig
        .sources
        .board
        .crossing(&Id::new("web").expect("an id"))
        .expect("declared");
    let page = rig.page("/crossings/web").await;
    let figures = from(&page, "figures");
    place(figures, &format!("{:.12}", view.status.target));
    place(figures, &format!("{:.12}", view.status.target_low));
    place(figures, "of \u{b1}64 that the buffer takes");
    let setting = view.status.setting.as_ref().expect("it has one");
    place(figures, &words::runs(&setting.realised));
    place(from(&page, "phase-picture"), "foreseen");
    // The picture of the choice has the ratio that runs by name.
    let choice = from(&page, "choice");
    place(choice, "<title>The fractions around the target</title>");
    let average = setting.average();
    place(choice, &format!("{}/{}", average.numer(), average.denom()));
    place(
        from(&page, "settings"),
        &format!("/settings/{}-{}", setting.epoch, setting.number),
    );
    place(from(&page, "declared"), "L up to");
}

#[tokio::test]
async fn a_cadence_is_explained_by_its_gap() {
    let rig = Rig::sample(900);
    let crossings = rig.sources.board.crossings(None, usize::MAX);
    let with_cadence = crossings.iter().find(|view| {
        let setting = view.status.setting.as_ref();
        matches!(
            setting.map(|s| &s.realised),
            Some(ratewright_control::Realised::Cadence(_))
        )
    });
    let view = with_cadence.expect("the sample has cadences");
    let page = rig
        .page(&format!("/crossings/{}", view.declaration.id))
        .await;
    let proof = from(&page, "proof");
    place(proof, "Nothing within the bounds lies between");
    place(proof, "a gap of");
    place(proof, "never off by more than");
}

#[tokio::test]
async fn every_setting_is_kept_and_explained() {
    let rig = Rig::sample(900);
    let list = rig.page("/crossings/web/settings").await;
    place(&list, "href=\"/crossings/web/settings/1-1\"");
    place(&list, "the crossing was declared");
    let first = rig.page("/crossings/web/settings/1-1").await;
    place(
        from(&first, "explanation"),
        "Setting 1-1 of web: run at the ratio",
    );
    place(from(&first, "times"), "In effect from");
    place(&rig.page("/crossings/web/settings?before=1-2").await, "1-1");
    let (status, _, text) = rig.answer("/crossings/web/settings?before=x").await;
    assert_eq!(status, StatusCode::BAD_REQUEST);
    place(&text, "accepted is {epoch}-{number}");
}
