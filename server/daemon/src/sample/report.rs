//! Sends the facility's readings as its reporters would.

use std::time::Duration;

use ratewright_client::{
    Answer, Client, Exchange, Measurement, Reading, Receipts, Reference, ReportOptions, Reporter,
};
use ratewright_control as control;
use ratewright_rehearsal::Facility;
use ratewright_timing as timing;
use tokio::time::{MissedTickBehavior, interval};

use super::{SampleError, declare::id};
use crate::house::HouseClock;

/// Real time between looks at what has arrived.
const BEAT: Duration = Duration::from_millis(200);

pub(super) async fn forever(
    client: &Client,
    facility: Facility,
    house: HouseClock,
) -> Result<(), SampleError> {
    let (reporter, receipts) = client.report(ReportOptions::default());
    tokio::select! {
        ended = send(reporter, facility, house) => ended,
        ended = receive(receipts) => ended,
    }
}

async fn send(
    mut reporter: Reporter,
    mut facility: Facility,
    house: HouseClock,
) -> Result<(), SampleError> {
    let mut beat = interval(BEAT);
    beat.set_missed_tick_behavior(MissedTickBehavior::Delay);
    loop {
        beat.tick().await;
        for delivered in facility.until(house.now()) {
            let reading = on_the_wire(&delivered.reading);
            let sent = reporter.report_when_room(reading).await;
            sent.map_err(|_| SampleError::Closed)?;
        }
    }
}

/// Every refusal is logged: the facility's readings should all be taken in.
async fn receive(mut receipts: Receipts) -> Result<(), SampleError> {
    while let Some(answer) = receipts.next().await? {
        match answer {
            Answer::Receipt(receipt) => {
                for refused in receipt.refused {
                    let (field, value) = (refused.field, refused.value);
                    tracing::warn!(
                        field,
                        value,
                        accepted = refused.accepted,
                        "readings were refused"
                    );
                }
            }
            Answer::Lost(loss) => tracing::warn!(%loss, "the reporters lost contact"),
            _ => {}
        }
    }
    Err(SampleError::Closed)
}

fn on_the_wire(reading: &control::Reading) -> Reading {
    Reading {
        clock: id(&reading.clock),
        reference: match &reading.reference {
            control::Reference::House => Reference::House,
            control::Reference::Clock(clock) => Reference::Clock(id(clock)),
        },
        probe: ratewright_client::Id::new(&reading.probe).ok(),
        sequence: Some(reading.sequence),
        measurement: measurement(&reading.measurement),
    }
}

fn measurement(measurement: &timing::Measurement) -> Measurement {
    use timing::Measurement as Measured;
    match *measurement {
        Measured::Counter { count, bits, reference_ns }
        // The contract has one kind for both: a media timestamp counts the ticks of a media clock.
        | Measured::SenderReport { media_timestamp: count, bits, reference_ns } => {
            Measurement::Counter { count, bits, reference_ns }
        }
        Measured::Exchange { t1_ns, t2_ns, t3_ns, t4_ns } => {
            Measurement::Exchange(Exchange { t1_ns, t2_ns, t3_ns, t4_ns })
        }
        Measured::Frequency { drift, deviation, reference_ns } => {
            Measurement::Frequency { drift, deviation, reference_ns }
        }
    }
}
