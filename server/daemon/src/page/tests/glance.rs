//! The facility at a glance, the lists, and what all pages have in common.

use super::*;

#[tokio::test]
async fn the_front_tells_what_is_lost_before_anything_else() {
    let rig = Rig::sample(sample::FERRY_OUTAGE.from_ns / S + 120);
    let page = rig.page("/").await;
    let sentence = "<a href=\"/clocks/host-ferry\">Host aboard the night ferry</a> is in holdover: no readings for";
    assert!(place(&page, sentence) < place(&page, "<table"));
    // In the tables too the worst come first: the ferry's clocks before those that are locked.
    let clocks = from(&page, "clocks");
    assert!(place(clocks, "Desk aboard the ferry") < place(clocks, "</tbody>"));
    let list = rig.page("/clocks").await;
    assert!(place(&list, "Desk aboard the ferry") < place(&list, "Mixing desk, dance hall"));
    assert!(place(&list, "Mixing desk, dance hall") < place(&list, "House word clock"));
    // That it was lost is among what changed.
    let changed = from(&page, "changed");
    place(
        changed,
        "locked \u{2192} <span class=\"state fading\">holdover</span>, its readings have stopped",
    );
    // The counts lead to those they count.
    place(&page, "href=\"/clocks?state=holdover\"");
    let held = rig.page("/clocks?state=holdover").await;
    place(&held, "Host aboard the night ferry");
    assert!(!held.contains("Mixing desk, dance hall"));
}

#[tokio::test]
async fn the_lists_have_every_clock_and_crossing() {
    let rig = Rig::sample(300);
    let plan = sample::plan();
    let (clocks, crossings) = (rig.page("/clocks").await, rig.page("/crossings").await);
    for clock in plan.clocks() {
        place(&clocks, &clock.display_name);
        let page = rig.page(&format!("/clocks/{}", clock.id)).await;
        place(&page, &clock.display_name);
    }
    for crossing in &plan.crossings {
        place(&crossings, &crossing.display_name);
        let page = rig.page(&format!("/crossings/{}", crossing.id)).await;
        place(&page, &crossing.display_name);
    }
    let front = rig.page("/").await;
    place(&front, "All 12 crossings are holding");
    place(&front, "Not a safety system.");
    place(&front, "<title>How near to a slip</title>");
}

#[tokio::test]
async fn ten_thousand_clocks_are_leafed_through_and_searched() {
    let mut engine = Engine::new(1);
    for i in 0..120 {
        let mut clock = sample::plan().exact.remove(0);
        clock.id = Id::new(&format!("word-{i:03}")).expect("an id");
        clock.display_name = format!("Rack {i}");
        engine
            .apply(&Event::DeclareClock(clock), 1)
            .expect("it is sound");
    }
    let rig = Rig::of(engine);
    let first = rig.page("/clocks").await;
    place(&first, "1 to 50 of 120");
    place(&first, "href=\"/clocks?page=2\"");
    let last = rig.page("/clocks?page=3").await;
    place(&last, "101 to 120 of 120");
    place(&last, "Rack 119");
    let found = rig.page("/clocks?q=rACK+11").await;
    place(&found, "1 to 11 of 11");
    assert!(!found.contains("Rack 109"));
    // A page that is no longer there is the last one; what is not a page is told.
    place(&rig.page("/clocks?page=99").await, "101 to 120 of 120");
    for (path, told) in [
        (
            "/clocks?page=x",
            "page is x: accepted is a number from 1 on",
        ),
        (
            "/clocks?state=odd",
            "state is odd: accepted is free-running, holdover, acquiring, locked",
        ),
        (
            "/crossings?page=0",
            "page is 0: accepted is a number from 1 on",
        ),
    ] {
        let (status, _, text) = rig.answer(path).await;
        assert_eq!(status, StatusCode::BAD_REQUEST);
        place(&text, told);
    }
}

/// Nothing from elsewhere, no script or style that the policy would have to allow by exception, and
/// only questions.
#[tokio::test]
async fn no_page_needs_anybody_else_or_changes_anything() {
    let rig = Rig::sample(60);
    let paths = [
        "/",
        "/clocks?q=desk",
        "/crossings",
        "/changes",
        "/clocks/hall-desk",
        "/crossings/web",
        "/crossings/web/settings",
        "/crossings/web/settings/1-1",
        "/plan",
    ];
    for path in paths {
        let (status, headers, page) = rig.answer(path).await;
        assert_eq!(status, StatusCode::OK, "{path}");
        let bare = page.replace("xmlns=\"http://www.w3.org/2000/svg\"", "");
        for foreign in [
            "http://",
            "https://",
            "//",
            "<style",
            "style=",
            " onclick",
            "method=\"post\"",
        ] {
            assert!(!bare.contains(foreign), "{foreign} is on {path}");
        }
        let policy = headers[header::CONTENT_SECURITY_POLICY]
            .to_str()
            .expect("it is text");
        assert!(policy.starts_with("default-src 'none'"));
        assert!(
            !policy.contains("unsafe") && !policy.contains('*'),
            "{policy}"
        );
        assert_eq!(page.matches("<h1").count(), 1, "{path}");
        no_id_twice(path, &page);
    }
    for path in [
        "/nothing",
        "/clocks/nobody",
        "/crossings/No-Id!",
        "/crossings/web/settings/9-9",
    ] {
        assert_eq!(rig.answer(path).await.0, StatusCode::NOT_FOUND, "{path}");
    }
    let put = Request::post("/crossings/web")
        .body(Body::empty())
        .expect("a path");
    let answer = router(rig.sources.clone())
        .oneshot(put)
        .await
        .expect("it never fails");
    assert_eq!(answer.status(), StatusCode::METHOD_NOT_ALLOWED);
}

fn no_id_twice(path: &str, page: &str) {
    let mut ids: Vec<&str> = page
        .split(" id=\"")
        .skip(1)
        .filter_map(|rest| rest.split('"').next())
        .collect();
    ids.sort_unstable();
    let twice = ids.windows(2).find(|pair| pair[0] == pair[1]);
    assert_eq!(twice, None, "on {path}");
}

#[tokio::test]
async fn names_are_escaped_everywhere() {
    const NAME: &str = "<script>alert('\"&')</script>";
    let mut engine = Engine::new(1);
    let mut clocks = sample::plan().exact;
    clocks.truncate(1);
    let mut other = clocks[0].clone();
    other.id = Id::new("other").expect("an id");
    clocks.push(other);
    for clock in &mut clocks {
        clock.display_name = NAME.to_owned();
        engine
            .apply(&Event::DeclareClock(clock.clone()), 1)
            .expect("any text is a title");
    }
    let mut crossing = sample::plan().crossings.remove(0);
    (crossing.source, crossing.sink) = (clocks[0].id.clone(), clocks[1].id.clone());
    crossing.display_name = NAME.to_owned();
    let id = crossing.id.clone();
    engine
        .apply(&Event::DeclareCrossing(crossing), 1)
        .expect("any text is a title");
    let rig = Rig::of(engine);
    let of_crossing = format!("/crossings/{id}");
    for path in ["/", "/clocks", "/crossings", "/clocks/other", &of_crossing] {
        let page = rig.page(path).await;
        place(&page, "&lt;script&gt;alert('");
        assert!(!page.contains("<script>"), "{path}");
    }
    // What is asked comes back in the page too.
    let asked = "%22%3E%3Cscript%3Ealert(1)%3C/script%3E";
    for path in [
        format!("/clocks?q={asked}"),
        format!("/plan?from={asked}&to=48k"),
    ] {
        let (_, _, page) = rig.answer(&path).await;
        place(&page, "&quot;&gt;&lt;script&gt;");
        assert!(!page.contains("<script>alert"), "{path}");
    }
}

#[tokio::test]
async fn an_empty_facility_has_a_page() {
    let page = Rig::of(Engine::new(1)).page("/").await;
    place(&page, "Nothing is declared yet.");
    place(&page, "No crossing is declared.");
}

#[tokio::test]
async fn readiness_follows_the_phase_and_liveness_does_not() {
    let mut rig = Rig::sample(5);
    let unready = StatusCode::SERVICE_UNAVAILABLE;
    let expected = [
        (Phase::Recovering, unready, "recovering\n", unready),
        (Phase::Serving, StatusCode::OK, "serving\n", StatusCode::OK),
        (Phase::Draining, unready, "draining\n", StatusCode::OK),
    ];
    for (phase, status, text, closely) in expected {
        rig.sources.readiness = Readiness::new();
        rig.sources.readiness.enter(phase);
        let (ready, _, told) = rig.answer("/readyz").await;
        assert_eq!((ready, told.as_str()), (status, text));
        assert_eq!(rig.answer("/livez").await.0, StatusCode::OK);
        // The engine is not there to be asked yet; what the board has is shown all the same.
        assert_eq!(rig.answer("/clocks/hall-desk").await.0, closely);
        assert_eq!(rig.answer("/").await.0, StatusCode::OK);
    }
}
