//! Followers in a storm, small enough for every day; `cargo run --release -p ratewright-tests
//! --example chaos -- 1000 100000` raises a greater one.

use ratewright_tests::chaos::proxy::FATES;
use ratewright_tests::chaos::storm::{Plan, rage};

#[tokio::test(flavor = "multi_thread")]
async fn followers_end_at_the_newest_setting_whatever_the_network_does() {
    let plan = Plan {
        followers: 64,
        crossings: 16,
        changes: 1_600,
        restarts: 2,
        seed: 3,
    };
    let outcome = rage(&plan).await.expect("the daemon serves");
    assert_eq!(outcome.wrongs, [""; 0]);
    assert_eq!(outcome.behind, [""; 0]);
    assert!(outcome.acknowledged >= plan.changes, "{outcome:?}");
    // Every acknowledged update made a setting; those that failed may have.
    assert!(outcome.numbers >= outcome.acknowledged, "{outcome:?}");
    assert!(outcome.handed >= plan.followers as u64, "{outcome:?}");
    assert!(outcome.losses > 0, "{outcome:?}");
    let lied = FATES.iter().zip(outcome.fates);
    let lied = lied.filter(|(fate, _)| matches!(fate, ratewright_tests::chaos::proxy::Fate::Lied));
    let lied: u64 = lied.map(|(_, count)| count).sum();
    assert!(lied > 0 && outcome.forged > 0, "{outcome:?}");
}
