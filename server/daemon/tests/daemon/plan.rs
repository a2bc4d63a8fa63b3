//! Planning over the wire.

use ratewright_proto::v1;

use crate::facility::{Facility, violations};

#[tokio::test]
async fn the_classic_ratio_is_found_exact() {
    let mut facility = Facility::start().await;
    let hertz = |numerator| {
        Some(v1::Rate {
            numerator,
            denominator: 1,
        })
    };
    let request = v1::PlanRatioRequest {
        source_rate: hertz(44_100),
        sink_rate: hertz(48_000),
        max_l: 256,
        max_m: 256,
        ..Default::default()
    };
    let plan = facility
        .clients
        .ratios
        .plan_ratio(request.clone())
        .await
        .unwrap()
        .into_inner();
    let best = plan.best.unwrap();
    assert_eq!(best.ratio, Some(v1::Ratio { l: 160, m: 147 }));
    assert!(best.exact && best.residual_ppb == 0.0 && best.seconds_to_slip.is_none());
    assert!(plan.cadence.is_none());

    let small = v1::PlanRatioRequest {
        max_l: 100,
        max_m: 100,
        ..request.clone()
    };
    let plan = facility
        .clients
        .ratios
        .plan_ratio(small)
        .await
        .unwrap()
        .into_inner();
    let best = plan.best.unwrap();
    assert!(!best.exact && best.seconds_to_slip.unwrap() > 0.0);
    assert!(plan.cadence.is_some() && plan.ladder.len() > 3);

    let wrong = v1::PlanRatioRequest {
        sink_rate: hertz(0),
        ..request
    };
    let status = facility.clients.ratios.plan_ratio(wrong).await.unwrap_err();
    assert_eq!(violations(&status)[0].0, "sink_rate.numerator");
}

#[tokio::test]
async fn a_limit_and_wishes_go_over_the_wire() {
    let mut facility = Facility::start().await;
    let hertz = |numerator| {
        Some(v1::Rate {
            numerator,
            denominator: 1,
        })
    };
    let request = v1::PlanRatioRequest {
        source_rate: hertz(44_100),
        sink_rate: hertz(48_000),
        limit: Some(v1::plan_ratio_request::Limit::LMultipleOf(320)),
        filter: Some(v1::FilterWish {
            passband_hz: 20_000.0,
            attenuation_db: 100.0,
        }),
        phases: 256,
        frame_rate: hertz(25),
        ..Default::default()
    };
    let plan = facility.clients.ratios.plan_ratio(request.clone()).await;
    let plan = plan.unwrap().into_inner();
    assert_eq!(plan.best.unwrap().ratio, Some(v1::Ratio { l: 320, m: 294 }));
    assert!(plan.reduced.is_some() && plan.chains.len() > 1);
    assert_eq!(plan.stepping.unwrap().phases, 256);
    assert_eq!(plan.sink_frames.unwrap().samples, [1_920]);

    let wrong = v1::PlanRatioRequest {
        phases: 1,
        ..request
    };
    let status = facility.clients.ratios.plan_ratio(wrong).await.unwrap_err();
    assert_eq!(violations(&status)[0].0, "phases");
}
