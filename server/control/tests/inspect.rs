//! The close look at a clock and at a crossing.

mod world;

use ratewright_control::{CrossingDeclaration, Realisation, Reference};
use ratewright_ratio::Bounds;
use ratewright_timing::State;
use ratewright_timing::sim::Delay;
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

/// A desk read with a jitter of 3 µs, and a crossing to house time with little room.
fn world() -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let delay = Delay::Normal { deviation_s: 3e-6 };
    world.add(clock("desk", 44_100), crystal(-8e-6, 1e-10), delay, SECOND);
    world.cross(CrossingDeclaration {
        bounds: Bounds::new(1024, 1024).expect("in range"),
        realisation: Realisation::Single,
        headroom_samples: 4.0,
        ..crossing("x", "desk", "house")
    });
    world
}

#[test]
fn the_forecast_leaves_the_room_when_the_status_says() {
    let mut world = world();
    for end in [60 * SECOND, 600 * SECOND, HOUR] {
        world.run_until(end);
        let status = world.engine.status(&id("x"), world.now).expect("declared");
        let slip = status.seconds_to_slip.expect("one ratio cannot hold it");
        let after = [0.0, slip * 0.999, slip * 1.001];
        let forecast = world.engine.phase_forecast(&id("x"), world.now, &after);
        let forecast = forecast.expect("it has a setting");
        let reach: Vec<f64> = forecast
            .points
            .iter()
            .map(|p| p.phase_samples.abs() + 1.96 * p.deviation_samples)
            .collect();
        assert!((forecast.points[0].phase_samples - status.phase_error_samples).abs() < 1e-9);
        assert!(reach[1] < forecast.room_samples, "{end}: {forecast:?}");
        assert!(reach[2] > forecast.room_samples, "{end}: {forecast:?}");
    }
    let unknown = world.engine.phase_forecast(&id("y"), world.now, &[0.0]);
    assert_eq!(unknown, None);
}

#[test]
fn a_link_tells_its_probe_and_how_good_it_is() {
    let mut world = world();
    world.run_until(HOUR);
    let links = world
        .engine
        .links(&id("desk"), world.now)
        .expect("declared");
    let [link] = links.as_slice() else {
        panic!("one probe reads it: {links:?}")
    };
    assert!(link.counts && link.reference == Reference::House);
    assert_eq!(link.estimate.state, State::Locked);
    assert!((world.now - link.arrived_ns) < 2 * SECOND);
    let direction = link.diagnosis.directions[0];
    assert!((direction.deviation_s - 3e-6).abs() < 1e-6, "{direction:?}");
    assert_eq!(
        world.engine.links(&id("house"), world.now),
        Some(Vec::new())
    );
    assert_eq!(world.engine.links(&id("nobody"), world.now), None);
}
