//! Clocks and crossings of the fake.

use ratewright_proto::v1;
use tonic::{Code, Request, Response, Status};
use tonic_types::{ErrorDetails, StatusExt as _};
use v1::act::What;
use v1::clock_service_server::ClockService;
use v1::crossing_service_server::CrossingService;

use super::{Facility, HOUSE_NS};

/// A crossing as the daemon would give it.
pub(super) fn crossing(id: &str, max_l: u64, max_m: u64) -> v1::Crossing {
    v1::Crossing {
        name: format!("crossings/{id}"),
        source_clock: "clocks/a".to_owned(),
        sink_clock: "clocks/b".to_owned(),
        max_l,
        max_m,
        headroom_samples: 1.0,
        status: Some(v1::CrossingStatus {
            state: v1::CrossingState::Holding.into(),
            reason: "both clocks are measured".to_owned(),
            as_of_ns: HOUSE_NS,
            source_clock: "clocks/a".to_owned(),
            ..Default::default()
        }),
        ..Default::default()
    }
}

fn estimate(clock: &v1::Clock) -> v1::Estimate {
    v1::Estimate {
        state: v1::EstimateState::Locked.into(),
        drift: 12.5e-6,
        deviation: 0.01e-6,
        drift_low: 12.48e-6,
        drift_high: 12.52e-6,
        as_of_ns: HOUSE_NS,
        last_reading_ns: if clock.exact { 0 } else { HOUSE_NS - 1 },
        reference: "house".to_owned(),
        readings_used: u64::from(!clock.exact),
        ..Default::default()
    }
}

fn not_found(name: &str) -> Status {
    Status::not_found(format!("{name} was never declared"))
}

#[tonic::async_trait]
impl ClockService for Facility {
    async fn create_clock(
        &self,
        request: Request<v1::CreateClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        let mut clock = request.into_inner().clock.unwrap_or_default();
        if clock.tolerance_ppm > 10_000.0 {
            let details = ErrorDetails::with_bad_request_violation(
                "clock.tolerance_ppm",
                format!("{}: accepted are 0 to 10000", clock.tolerance_ppm),
            );
            return Err(Status::with_error_details(
                Code::InvalidArgument,
                "bad clock",
                details,
            ));
        }
        let mut known = self.known();
        if known.clocks.contains_key(&clock.name) {
            return Err(Status::already_exists(format!(
                "{} is declared",
                clock.name
            )));
        }
        clock.estimate = Some(estimate(&clock));
        known.clocks.insert(clock.name.clone(), clock.clone());
        Ok(Response::new(clock))
    }

    async fn get_clock(
        &self,
        request: Request<v1::GetClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        let name = request.into_inner().name;
        let clock = self.known().clocks.get(&name).cloned();
        clock.map(Response::new).ok_or_else(|| not_found(&name))
    }

    /// Pages of one clock, so that a client that forgets to turn the page is found out.
    async fn list_clocks(
        &self,
        request: Request<v1::ListClocksRequest>,
    ) -> Result<Response<v1::ListClocksResponse>, Status> {
        let after = request.into_inner().page_token;
        let known = self.known();
        let mut later = known.clocks.values().filter(|clock| clock.name > after);
        let clocks: Vec<_> = later.next().cloned().into_iter().collect();
        let more = later.next().is_some();
        let last = clocks.last().map(|clock| clock.name.clone());
        let next_page_token = last.filter(|_| more).unwrap_or_default();
        Ok(Response::new(v1::ListClocksResponse {
            clocks,
            next_page_token,
        }))
    }

    async fn update_clock(
        &self,
        _: Request<v1::UpdateClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        Err(Status::unimplemented("the fake changes no clocks"))
    }

    async fn delete_clock(
        &self,
        _: Request<v1::DeleteClockRequest>,
    ) -> Result<Response<()>, Status> {
        Err(Status::unimplemented("the fake deletes no clocks"))
    }
}

#[tonic::async_trait]
impl CrossingService for Facility {
    async fn create_crossing(
        &self,
        request: Request<v1::CreateCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let wire = request.into_inner().crossing.unwrap_or_default();
        let id = wire.name.trim_start_matches("crossings/");
        self.declare_crossing(id, wire.max_l, wire.max_m);
        Ok(Response::new(crossing(id, wire.max_l, wire.max_m)))
    }

    async fn get_crossing(
        &self,
        request: Request<v1::GetCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let name = request.into_inner().name;
        let crossing = self.known().crossing(&name);
        crossing.map(Response::new).ok_or_else(|| not_found(&name))
    }

    async fn list_crossings(
        &self,
        _: Request<v1::ListCrossingsRequest>,
    ) -> Result<Response<v1::ListCrossingsResponse>, Status> {
        let known = self.known();
        let crossings = known
            .crossings
            .keys()
            .filter_map(|name| known.crossing(name))
            .collect();
        let next_page_token = String::new();
        Ok(Response::new(v1::ListCrossingsResponse {
            crossings,
            next_page_token,
        }))
    }

    async fn update_crossing(
        &self,
        _: Request<v1::UpdateCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        Err(Status::unimplemented("the fake changes no crossings"))
    }

    async fn delete_crossing(
        &self,
        _: Request<v1::DeleteCrossingRequest>,
    ) -> Result<Response<()>, Status> {
        Err(Status::unimplemented("the fake deletes no crossings"))
    }

    async fn pin_crossing(
        &self,
        request: Request<v1::PinCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let v1::PinCrossingRequest { name, by, note } = request.into_inner();
        let pin = v1::Pin {
            by: by.clone(),
            since_ns: HOUSE_NS,
            note: note.clone(),
        };
        let what = What::Pinned(v1::Pinned {});
        self.act((&name, by, note), what, |status| status.pin = Some(pin))
    }

    async fn release_crossing(
        &self,
        request: Request<v1::ReleaseCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let v1::ReleaseCrossingRequest { name, by, note } = request.into_inner();
        let what = What::Released(v1::Released {});
        self.act((&name, by, note), what, |status| status.pin = None)
    }

    async fn change_over(
        &self,
        request: Request<v1::ChangeOverRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let v1::ChangeOverRequest {
            name,
            source_clock,
            by,
            note,
        } = request.into_inner();
        let what = What::ChangedOver(v1::ChangedOver {
            from_clock: "clocks/a".to_owned(),
            to_clock: source_clock.clone(),
        });
        self.act((&name, by, note), what, |status| {
            status.source_clock = source_clock;
        })
    }

    /// Pages of one act, as for clocks.
    async fn list_acts(
        &self,
        request: Request<v1::ListActsRequest>,
    ) -> Result<Response<v1::ListActsResponse>, Status> {
        let v1::ListActsRequest {
            parent, page_token, ..
        } = request.into_inner();
        let known = self.known();
        let newest_first = known.acts.iter().rev();
        let on_it = newest_first.filter(|act| act.crossing == parent);
        let listed: usize = page_token.parse().unwrap_or(0);
        let mut left = on_it.skip(listed);
        let acts = left.next().cloned().into_iter().collect();
        let more = left.next().map(|_| (listed + 1).to_string());
        let next_page_token = more.unwrap_or_default();
        Ok(Response::new(v1::ListActsResponse {
            acts,
            next_page_token,
        }))
    }
}

impl Facility {
    /// Does what an operator asks for and keeps the record of it.
    fn act(
        &self,
        (name, by, note): (&str, String, String),
        what: What,
        change: impl FnOnce(&mut v1::CrossingStatus),
    ) -> Result<Response<v1::Crossing>, Status> {
        let mut known = self.known();
        let crossing = known.crossings.get_mut(name);
        let status = crossing.and_then(|crossing| crossing.status.as_mut());
        change(status.ok_or_else(|| not_found(name))?);
        known.acts.push(v1::Act {
            crossing: name.to_owned(),
            by,
            note,
            at_ns: HOUSE_NS,
            what: Some(what),
        });
        let crossing = known.crossing(name);
        crossing.map(Response::new).ok_or_else(|| not_found(name))
    }
}
