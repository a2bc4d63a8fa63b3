//! What a watcher sees, and what it is spared.

mod fake_server;

use std::time::Duration;

use fake_server::{FakeServer, cadence_setting, lazy_setting, nearest_setting, stepping_setting};
use ratewright_client::{
    Client, Freshness, Id, Realised, RefusalKind, Setting, Update, VerifyError, Watch,
};
use ratewright_proto::v1;
use ratewright_ratio::Fraction;
use v1::certificate::Proof;
use v1::setting::Realisation;

const BOUNDS: (u64, u64) = (256, 256);

fn id(text: &str) -> Id {
    Id::new(text).expect("an id")
}

async fn watching(server: &FakeServer) -> Watch {
    server
        .facility
        .declare_crossing("hall-to-van", BOUNDS.0, BOUNDS.1);
    Client::connect(&server.address())
        .await
        .expect("it listens")
        .watch(&[id("hall-to-van")])
}

async fn next(watch: &mut Watch) -> Update {
    let next = tokio::time::timeout(Duration::from_secs(20), watch.next());
    next.await.expect("within 20 s").expect("no refusal")
}

async fn next_setting(watch: &mut Watch) -> Setting {
    match next(watch).await {
        Update::Setting(setting) => *setting,
        other => panic!("a setting was due, not {other:?}"),
    }
}

fn good(number: (u64, u64), target: f64) -> v1::Setting {
    nearest_setting("hall-to-van", number, target, BOUNDS)
}

#[tokio::test]
async fn the_newest_comes_first_and_then_every_change() {
    let server = FakeServer::start();
    server.facility.publish(good((1, 4), 1.0884));
    let mut watch = watching(&server).await;
    assert_eq!(next_setting(&mut watch).await.number.number, 4);
    let wanted = Fraction::new(100_001, 100_000);
    server
        .facility
        .publish(cadence_setting("hall-to-van", (1, 5), wanted, BOUNDS));
    let setting = next_setting(&mut watch).await;
    assert_eq!((setting.number.number, setting.wanted), (5, wanted));
}

#[tokio::test]
async fn nothing_older_comes_after_something_newer() {
    let server = FakeServer::start();
    server.facility.publish(good((1, 5), 1.0884));
    let mut watch = watching(&server).await;
    let mut seen = vec![next_setting(&mut watch).await.number];
    // Each of the three that may come is the first to be seen after those that may not.
    for number in [
        (1, 4),
        (1, 5),
        (2, 1),
        (1, 99),
        (2, 1),
        (2, 2),
        (2, 1),
        (3, 1),
    ] {
        server.facility.say(good(number, 1.0884));
    }
    let mut older = Vec::new();
    while seen.len() < 4 {
        match next(&mut watch).await {
            Update::Setting(setting) => seen.push(setting.number),
            Update::Older { name, newest } => older.push((name, newest.epoch, newest.number)),
            other => panic!("{other:?}"),
        }
    }
    let seen: Vec<_> = seen.iter().map(|seen| (seen.epoch, seen.number)).collect();
    assert_eq!(seen, [(1, 5), (2, 1), (2, 2), (3, 1)]);
    let name = |number: &str| format!("crossings/hall-to-van/settings/{number}");
    let told = [
        (name("1-4"), 1, 5),
        (name("1-99"), 2, 1),
        (name("2-1"), 2, 2),
    ];
    assert_eq!(older, told, "passed over, but not the same again");
}

#[tokio::test]
async fn a_setting_whose_certificate_fails_is_refused_and_the_next_good_one_comes() {
    let server = FakeServer::start();
    server.facility.publish(good((1, 1), 1.0884));
    let mut watch = watching(&server).await;
    next_setting(&mut watch).await;

    // The bracket of another target.
    let mut other_proof = good((1, 2), 1.0884);
    other_proof.certificate = good((1, 2), 0.5001).certificate;
    // A ratio that is good, but not the nearest to what is wanted.
    let mut not_nearest = good((1, 3), 1.0884);
    not_nearest.realisation = Some(Realisation::Single(v1::Ratio { l: 12, m: 11 }));
    // Nearest within wider bounds than the crossing's: the bank does not hold it.
    let wide = nearest_setting("hall-to-van", (1, 4), 1.088_443_7, (2048, 2048));
    // Runs something else than is wanted, without a proof that nothing is nearer.
    let mut runs_other = good((1, 5), 1.0884);
    runs_other.certificate = Some(v1::Certificate {
        proof: Some(Proof::Uncertified("no reason".into())),
    });
    // A cadence whose counts do not average what is wanted.
    let wanted = Fraction::new(100_001, 100_000);
    let mut miscounted = cadence_setting("hall-to-van", (1, 6), wanted, BOUNDS);
    if let Some(Realisation::Cadence(cadence)) = &mut miscounted.realisation {
        cadence.high_blocks += 1;
    }
    // A cadence of two ratios with something nearer between them.
    let mut far_apart = cadence_setting("hall-to-van", (1, 7), wanted, (8, 8));
    let ends = v1::Bracket {
        below: Some(v1::Fraction {
            numerator: "1".into(),
            denominator: "1".into(),
        }),
        above: Some(v1::Fraction {
            numerator: "8".into(),
            denominator: "7".into(),
        }),
    };
    far_apart.certificate = Some(v1::Certificate {
        proof: Some(Proof::Neighbours(ends)),
    });

    for (bad, why) in [
        (other_proof, "certificate fails"),
        (not_nearest, "certificate fails"),
        (wide, "outside the crossing's bounds"),
        (runs_other, "is wanted"),
        (miscounted, "average is the wanted"),
        (far_apart, "mediant"),
    ] {
        let bad_name = bad.name.clone();
        server.facility.say(bad);
        match next(&mut watch).await {
            Update::Refused { name, error } => {
                assert_eq!(name, bad_name);
                assert!(error.to_string().contains(why), "{name}: {error}");
            }
            other => panic!("{bad_name} should be refused ({why}), not {other:?}"),
        }
    }
    server.facility.publish(good((1, 8), 1.0884));
    assert_eq!(next_setting(&mut watch).await.number.number, 8);
}

#[tokio::test]
async fn a_stepping_and_a_lazy_pair_are_verified_too() {
    let server = FakeServer::start();
    let wanted = Fraction::new(100_001, 100_000);
    let stepping = |number| stepping_setting("hall-to-van", number, wanted, 256);
    let lazy = |number, swing| lazy_setting("hall-to-van", number, wanted, BOUNDS, swing);
    server.facility.publish(stepping((1, 1)));
    let mut watch = watching(&server).await;
    let Realised::Stepping(run) = next_setting(&mut watch).await.realised else {
        panic!("a stepping was published");
    };
    assert_eq!((run.phases(), run.advances()), (256, (255, 256)));

    let too_large = stepping_setting("hall-to-van", (1, 2), wanted, 257);
    let mut other_advance = stepping((1, 3));
    if let Some(Realisation::Stepping(run)) = &mut other_advance.realisation {
        (run.advance, run.longer_advance) = (256, 257);
    }
    let mut other_proof = stepping((1, 4));
    other_proof.certificate = Some(v1::Certificate {
        proof: Some(Proof::Stepping(v1::SteppingPair {
            phases: 256,
            advance: 256,
        })),
    });
    let mut no_proof_of_it = stepping((1, 5));
    no_proof_of_it.certificate = lazy((1, 5), 2.0).certificate;
    for (bad, why) in [
        (too_large, "more than the crossing's 256"),
        (other_advance, "either side of the wanted one"),
        (other_proof, "certificate fails"),
        (no_proof_of_it, "another kind"),
        (lazy((1, 6), 0.001), "the error bound of the cadence"),
        (lazy((1, 7), f64::NAN), "the error bound of the cadence"),
        (lazy((1, 8), 1e10), "to 10^9"),
    ] {
        let bad_name = bad.name.clone();
        server.facility.say(bad);
        match next(&mut watch).await {
            Update::Refused { name, error } => {
                assert_eq!(name, bad_name);
                assert!(error.to_string().contains(why), "{name}: {error}");
            }
            other => panic!("{bad_name} should be refused ({why}), not {other:?}"),
        }
    }
    server.facility.publish(lazy((1, 9), 2.0));
    let Realised::Lazy { swing_samples, .. } = next_setting(&mut watch).await.realised else {
        panic!("a lazy pair was published");
    };
    assert_eq!(swing_samples, 2.0);
}

#[tokio::test]
async fn bounds_declared_anew_are_asked_for_again() {
    let server = FakeServer::start();
    server.facility.publish(good((1, 1), 1.0884));
    let mut watch = watching(&server).await;
    next_setting(&mut watch).await;
    server.facility.declare_crossing("hall-to-van", 2048, 2048);
    server.facility.publish(nearest_setting(
        "hall-to-van",
        (1, 2),
        1.088_443_7,
        (2048, 2048),
    ));
    assert_eq!(next_setting(&mut watch).await.number.number, 2);
    server.facility.known().crossings.clear();
    server.facility.declare_crossing("other", 1, 1);
    server.facility.say(nearest_setting(
        "hall-to-van",
        (1, 3),
        1.088_443_7,
        (16, 16),
    ));
    match next(&mut watch).await {
        Update::Refused { error, .. } => assert_eq!(error, VerifyError::NoBounds),
        other => panic!("a deleted crossing has no bounds: {other:?}"),
    }
}

#[tokio::test]
async fn a_watch_outlives_a_crash_and_says_when_it_was_stale() {
    let mut server = FakeServer::start();
    server.facility.publish(good((1, 1), 1.0884));
    let mut watch = watching(&server).await;
    let first = next_setting(&mut watch).await;
    assert_eq!(watch.freshness(&first), Freshness::Current);

    server.crash();
    let Update::Lost(loss) = next(&mut watch).await else {
        panic!("contact is lost")
    };
    assert!(loss.retry_in > Duration::ZERO);
    assert_eq!(watch.freshness(&first), Freshness::Stale);
    let expired = Setting {
        expiry_ns: fake_server::HOUSE_NS - 1,
        ..first.clone()
    };
    assert_eq!(watch.freshness(&expired), Freshness::Expired);

    server.facility.known().settings.clear();
    server.facility.publish(good((1, 2), 1.0885));
    server.restart();
    loop {
        match next(&mut watch).await {
            Update::Lost(_) => {}
            Update::Regained => break,
            other => panic!("contact comes back first: {other:?}"),
        }
    }
    assert_eq!(next_setting(&mut watch).await.number.number, 2);
    assert_eq!(watch.freshness(&first), Freshness::Current);
}

#[tokio::test]
async fn attempts_without_contact_are_few() {
    let mut server = FakeServer::start();
    let mut watch = watching(&server).await;
    server.facility.publish(good((1, 1), 1.0884));
    next_setting(&mut watch).await;
    server.crash();
    let mut losses = 0;
    let counting = async {
        while let Ok(Update::Lost(_)) = watch.next().await {
            losses += 1;
        }
    };
    let _ = tokio::time::timeout(Duration::from_secs(1), counting).await;
    // Delays of at least 50, 100, 200, 400 ms: a loop without back-off makes thousands.
    assert!((1..=6).contains(&losses), "{losses} attempts in a second");
}

#[tokio::test]
async fn an_unknown_crossing_is_a_refusal_and_not_a_loss() {
    let server = FakeServer::start();
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let error = client
        .watch(&[id("nowhere")])
        .next()
        .await
        .expect_err("it was never declared");
    assert!(error.is(RefusalKind::NotFound), "{error}");
}

#[tokio::test]
async fn a_cancelled_wait_loses_nothing() {
    let server = FakeServer::start();
    let mut watch = watching(&server).await;
    server.facility.publish(good((1, 1), 1.0884));
    let setting = loop {
        // So short that it is cut within the connection and within the checks.
        let next = tokio::time::timeout(Duration::from_micros(200), watch.next());
        if let Ok(update) = next.await {
            break update.expect("no refusal");
        }
    };
    assert!(matches!(setting, Update::Setting(_)), "{setting:?}");
}
