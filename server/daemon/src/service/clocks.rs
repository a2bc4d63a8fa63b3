//! ClockService.

use ratewright_control::{ClockDeclaration, Engine, Event, Id};
use ratewright_proto::v1::{self, clock_service_server::ClockService};
use tonic::{Request, Response, Status};

use super::{Access, etag, mask, paging};
use crate::{
    convert::{clock, engine, names},
    refused::{Refused, Violation},
};

#[derive(Debug)]
pub(super) struct Clocks(pub(super) Access);

#[tonic::async_trait]
impl ClockService for Clocks {
    async fn create_clock(
        &self,
        request: Request<v1::CreateClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        let declared = clock::declaration("clock", request.into_inner().clock)?;
        let id = declared.id.clone();
        self.change(move |engine| match engine.clock(&declared.id) {
            Some(_) => Err(Refused::AlreadyExists(names::clock(&declared.id))),
            None => Ok(Event::DeclareClock(declared)),
        })
        .await?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn get_clock(
        &self,
        request: Request<v1::GetClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        let id = names::parse_clock("name", &request.get_ref().name)?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn list_clocks(
        &self,
        request: Request<v1::ListClocksRequest>,
    ) -> Result<Response<v1::ListClocksResponse>, Status> {
        let v1::ListClocksRequest {
            page_size,
            page_token,
        } = request.into_inner();
        let page = paging::page("clocks", page_size, &page_token)?;
        let after = page.after.as_deref().and_then(|id| Id::new(id).ok());
        let found = self.0.board.clocks(after.as_ref(), page.size + 1);
        let (views, next_page_token) =
            page.cut("clocks", found, |view| view.declaration.id.to_string());
        let clocks = views.iter().map(|view| clock::view_to_wire(view)).collect();
        Ok(Response::new(v1::ListClocksResponse {
            clocks,
            next_page_token,
        }))
    }

    async fn update_clock(
        &self,
        request: Request<v1::UpdateClockRequest>,
    ) -> Result<Response<v1::Clock>, Status> {
        let v1::UpdateClockRequest {
            clock: sent,
            update_mask,
        } = request.into_inner();
        let sent = sent.ok_or_else(|| Violation::new("clock", "absent", "a clock"))?;
        let id = names::parse_clock("clock.name", &sent.name)?;
        let fields = mask::fields(update_mask, &clock::FIELDS)?;
        let found = id.clone();
        self.change(move |engine| {
            let current = current(engine, &found, &sent.etag)?;
            let merged = clock::overlay(clock::declaration_to_wire(current), sent, &fields);
            clock::declaration("clock", Some(merged)).map(Event::DeclareClock)
        })
        .await?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn delete_clock(
        &self,
        request: Request<v1::DeleteClockRequest>,
    ) -> Result<Response<()>, Status> {
        let v1::DeleteClockRequest { name, etag } = request.into_inner();
        let id = names::parse_clock("name", &name)?;
        self.change(move |engine| {
            current(engine, &id, &etag)?;
            Ok(Event::DeleteClock(id))
        })
        .await?;
        Ok(Response::new(()))
    }
}

impl Clocks {
    fn shown(&self, id: &Id) -> Result<v1::Clock, Refused> {
        let view = self.0.board.clock(id);
        view.map(|view| clock::view_to_wire(&view))
            .ok_or_else(|| Refused::not_found(names::clock(id)))
    }

    async fn change(
        &self,
        decide: impl FnOnce(&Engine) -> Result<Event, Refused> + Send + 'static,
    ) -> Result<(), Refused> {
        let done = self.0.desk.decide(decide).await?;
        done.sole()
            .map_err(|refusal| engine::refused(refusal, clock::path_of))
    }
}

fn current<'a>(
    engine: &'a Engine,
    id: &Id,
    sent_etag: &str,
) -> Result<&'a ClockDeclaration, Refused> {
    let current = engine
        .clock(id)
        .ok_or_else(|| Refused::not_found(names::clock(id)))?;
    etag::check(names::clock(id), sent_etag, clock::etag(current))?;
    Ok(current)
}
