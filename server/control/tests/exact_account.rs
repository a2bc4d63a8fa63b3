//! The account of a crossing between exact clocks is an integral of ratios that are known for
//! certain: here it is done once more, in integers.
//!
//! `PROPTEST_CASES` says on how many random lives, if it is set.

mod world;

use proptest::prelude::*;
use ratewright_control::{CrossingDeclaration, Effects, Engine, Event, Realisation, Transition};
use ratewright_ratio::{Bounds, Fraction};
use world::{SECOND, crossing, exact_clock, id};

/// Rates of the two clocks, Hz: numerator and denominator.
type Rates = ((u64, u64), (u64, u64));

/// One setting: its number, average ratio and effect.
#[derive(Clone, Copy, Debug)]
struct Entry {
    number: u64,
    ratio: Fraction,
    effect_ns: i64,
    is_reported: bool,
}

/// The other account.
struct Account {
    rates: Rates,
    entries: Vec<Entry>,
    /// The phase error was this, in units of 2⁻²⁰ samples, at that time; nothing before counts.
    centred: (i128, i64),
}

/// `rate · ns` in units of 2⁻²⁰ samples, times a ratio. Each rounding is below one unit.
fn units((numer, denom): (u64, u64), ratio: Fraction, ns: i64) -> i128 {
    let product = i128::from(*ratio.numer()) * i128::from(numer) * i128::from(ns);
    let divisor = i128::from(*ratio.denom()) * i128::from(denom) * 1_000_000_000;
    let (whole, rest) = (product.div_euclid(divisor), product.rem_euclid(divisor));
    (whole << 20) + (rest << 20) / divisor
}

impl Account {
    fn take(&mut self, effects: &Effects, now: i64) {
        for transition in &effects.transitions {
            if let Transition::Centred {
                phase_error_samples,
                ..
            } = transition
            {
                self.centred = ((phase_error_samples * 1_048_576.0) as i128, now);
            }
        }
        for setting in &effects.settings {
            self.entries.push(Entry {
                number: setting.number,
                ratio: setting.average(),
                effect_ns: setting.effect_ns,
                is_reported: false,
            });
        }
    }

    /// A setting took effect at another time, but not before the one before it, and those after
    /// it not before it. Only the first report counts.
    fn applied(&mut self, number: u64, house_ns: i64) {
        let place = self.entries.iter().position(|entry| entry.number == number);
        let i = place.expect("the engine knew the setting");
        if std::mem::replace(&mut self.entries[i].is_reported, true) {
            return;
        }
        let earliest_ns = i.checked_sub(1).map(|i| self.entries[i].effect_ns);
        let truly_ns = house_ns.max(earliest_ns.unwrap_or(i64::MIN));
        self.entries[i].effect_ns = truly_ns;
        for later in &mut self.entries[i + 1..] {
            later.effect_ns = later.effect_ns.max(truly_ns);
        }
    }

    /// The phase error at `now`, sink samples.
    fn phase(&self, now: i64) -> f64 {
        let ends = self.entries.iter().skip(1).map(|next| next.effect_ns);
        let mut sum = self.centred.0;
        for (entry, end_ns) in self.entries.iter().zip(ends.chain([i64::MAX])) {
            let from_ns = entry.effect_ns.max(self.centred.1);
            let to_ns = end_ns.min(now);
            if from_ns < to_ns {
                let one = Fraction::from_integer(1);
                sum += units(self.rates.0, entry.ratio, to_ns - from_ns);
                sum -= units(self.rates.1, one, to_ns - from_ns);
            }
        }
        sum as f64 / 1_048_576.0
    }
}

/// What happens, and how long after what was before.
#[derive(Clone, Debug)]
enum Step {
    Declare(Box<CrossingDeclaration>),
    /// The setting so many before the newest took effect so long after it was decided.
    Applied(u64, i64),
    Tick,
}

fn declared() -> impl Strategy<Value = Step> {
    let bounds = (1_u64..300, 1_u64..300);
    let times = (0..5 * SECOND, 10 * SECOND..300 * SECOND);
    (bounds, 0.5..5000.0, any::<bool>(), times).prop_map(
        |((l, m), headroom_samples, single, (lead_ns, review_horizon_ns))| {
            Step::Declare(Box::new(CrossingDeclaration {
                bounds: Bounds::new(l, m).expect("in range"),
                headroom_samples,
                realisation: if single {
                    Realisation::Single
                } else {
                    Realisation::Cadence
                },
                lead_ns,
                review_horizon_ns,
                ..crossing("x", "source", "sink")
            }))
        },
    )
}

fn step() -> impl Strategy<Value = (Step, i64)> {
    let step = prop_oneof![
        2 => declared(),
        4 => (0..4_u64, -SECOND..20 * SECOND).prop_map(|(back, late)| Step::Applied(back, late)),
        4 => Just(Step::Tick),
    ];
    let pause_ns = prop_oneof![8 => 0..30 * SECOND, 1 => 0..5000 * SECOND];
    (step, pause_ns)
}

fn rate() -> impl Strategy<Value = (u64, u64)> {
    const RATES: [(u64, u64); 4] = [(44_100, 1), (48_000, 1), (48_000_000, 1001), (8_000, 1)];
    proptest::sample::select(&RATES[..])
}

/// The largest phase error that is brought back: what 20 ppm of pitch do in ten minutes, and the
/// headroom.
fn recoverable(engine: &Engine, (numer, denom): (u64, u64)) -> f64 {
    let declaration = engine.crossing(&id("x")).expect("it was declared");
    let pitch = declaration.pitch_limit_ppm * 1e-6;
    declaration.headroom_samples + pitch * numer as f64 / denom as f64 * 600.0
}

fn live(rates: Rates, steps: &[(Step, i64)]) -> Result<(), TestCaseError> {
    let (mut engine, mut now) = (Engine::new(1), 0);
    for (name, (numer, denom)) in [("source", rates.0), ("sink", rates.1)] {
        let mut declaration = exact_clock(name, 1);
        declaration.nominal_hz = num_rational::Ratio::new(numer, denom);
        prop_assert!(engine.apply(&Event::DeclareClock(declaration), now).is_ok());
    }
    let mut account = Account {
        rates,
        entries: Vec::new(),
        centred: (0, i64::MIN),
    };
    let first = Step::Declare(Box::new(crossing("x", "source", "sink")));
    let mut gone = 0.0;
    for (step, pause_ns) in std::iter::once(&(first, 0)).chain(steps) {
        // What is due is done when it is due, as the caller promises.
        let until = now + pause_ns;
        while let Some(due) = engine.next_due().filter(|&due| due <= until) {
            now = due.max(now);
            account.take(&engine.apply(&Event::Tick, now).expect("a tick"), now);
        }
        now = until;
        let event = match step {
            Step::Declare(declaration) => Event::DeclareCrossing((**declaration).clone()),
            Step::Tick => Event::Tick,
            Step::Applied(back, late_ns) => {
                let Some(number) = (account.entries.len() as u64).checked_sub(*back) else {
                    continue;
                };
                let planned = account.entries.iter().find(|entry| entry.number == number);
                let house_ns = planned.map_or(now, |entry| entry.effect_ns) + late_ns;
                Event::Applied {
                    crossing: id("x"),
                    epoch: 1,
                    number,
                    house_ns,
                    sink_sample: 0,
                }
            }
        };
        let taken = engine.apply(&event, now);
        if let (
            Ok(_),
            Event::Applied {
                number, house_ns, ..
            },
        ) = (&taken, &event)
        {
            account.applied(*number, *house_ns);
        }
        if let Ok(effects) = &taken {
            account.take(effects, now);
        }
        let status = engine.status(&id("x"), now).expect("it was declared");
        let (own, other) = (status.phase_error_samples, account.phase(now));
        gone += (*pause_ns as f64) * 1e-9;
        // Doubles: each stretch is a difference of two counts of up to rate · seconds.
        let rounding = 1e-6 + 1e-11 * gone * 1e5;
        if other.abs() > recoverable(&engine, rates.1) {
            continue; // the next look will count the buffer as centred
        }
        prop_assert!((own - other).abs() < rounding, "{own} is {other} at {now}");
    }
    Ok(())
}

proptest! {
    #![proptest_config(world::cases(256))]

    #[test]
    fn the_account_between_exact_clocks_is_the_exact_integral(
        rates in (rate(), rate()),
        steps in proptest::collection::vec(step(), 1..25),
    ) {
        live(rates, &steps)?;
    }
}
