//! CrossingService.

use ratewright_control::{CrossingDeclaration, Engine, Event, Id};
use ratewright_proto::v1::{self, crossing_service_server::CrossingService};
use tonic::{Request, Response, Status};

use super::{Access, etag, mask, paging};
use crate::{
    convert::{crossing, engine, hand, names},
    refused::{Refused, Violation},
};

#[derive(Debug)]
pub(super) struct Crossings(pub(super) Access);

#[tonic::async_trait]
impl CrossingService for Crossings {
    async fn create_crossing(
        &self,
        request: Request<v1::CreateCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let declared = crossing::declaration("crossing", request.into_inner().crossing)?;
        let id = declared.id.clone();
        self.change(move |engine| match engine.crossing(&declared.id) {
            Some(_) => Err(Refused::AlreadyExists(names::crossing(&declared.id))),
            None => Ok(Event::DeclareCrossing(declared)),
        })
        .await?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn get_crossing(
        &self,
        request: Request<v1::GetCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let id = names::parse_crossing("name", &request.get_ref().name)?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn list_crossings(
        &self,
        request: Request<v1::ListCrossingsRequest>,
    ) -> Result<Response<v1::ListCrossingsResponse>, Status> {
        let v1::ListCrossingsRequest {
            page_size,
            page_token,
        } = request.into_inner();
        let page = paging::page("crossings", page_size, &page_token)?;
        let after = page.after.as_deref().and_then(|id| Id::new(id).ok());
        let found = self.0.board.crossings(after.as_ref(), page.size + 1);
        let (views, next_page_token) =
            page.cut("crossings", found, |view| view.declaration.id.to_string());
        let crossings = views
            .iter()
            .map(|view| crossing::view_to_wire(view))
            .collect();
        Ok(Response::new(v1::ListCrossingsResponse {
            crossings,
            next_page_token,
        }))
    }

    async fn update_crossing(
        &self,
        request: Request<v1::UpdateCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        let v1::UpdateCrossingRequest {
            crossing: sent,
            update_mask,
        } = request.into_inner();
        let sent = sent.ok_or_else(|| Violation::new("crossing", "absent", "a crossing"))?;
        let id = names::parse_crossing("crossing.name", &sent.name)?;
        let fields = mask::fields(update_mask, &crossing::FIELDS)?;
        let found = id.clone();
        self.change(move |engine| {
            let current = current(engine, &found, &sent.etag)?;
            let merged = crossing::overlay(crossing::declaration_to_wire(current), sent, &fields);
            crossing::declaration("crossing", Some(merged)).map(Event::DeclareCrossing)
        })
        .await?;
        Ok(Response::new(self.shown(&id)?))
    }

    async fn delete_crossing(
        &self,
        request: Request<v1::DeleteCrossingRequest>,
    ) -> Result<Response<()>, Status> {
        let v1::DeleteCrossingRequest { name, etag } = request.into_inner();
        let id = names::parse_crossing("name", &name)?;
        self.change(move |engine| {
            current(engine, &id, &etag)?;
            Ok(Event::DeleteCrossing(id))
        })
        .await?;
        Ok(Response::new(()))
    }

    async fn pin_crossing(
        &self,
        request: Request<v1::PinCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        self.act(hand::pin(request.into_inner())?).await
    }

    async fn release_crossing(
        &self,
        request: Request<v1::ReleaseCrossingRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        self.act(hand::release(request.into_inner())?).await
    }

    async fn change_over(
        &self,
        request: Request<v1::ChangeOverRequest>,
    ) -> Result<Response<v1::Crossing>, Status> {
        self.act(hand::change_over(request.into_inner())?).await
    }

    async fn list_acts(
        &self,
        request: Request<v1::ListActsRequest>,
    ) -> Result<Response<v1::ListActsResponse>, Status> {
        let v1::ListActsRequest {
            parent,
            page_size,
            page_token,
        } = request.into_inner();
        let id = names::parse_crossing("parent", &parent)?;
        let list = format!("{parent}/acts");
        let page = paging::page(&list, page_size, &page_token)?;
        let before = page.after.as_deref().and_then(|place| place.parse().ok());
        let known = self.0.board.crossing(&id).is_some();
        let found = self.0.history.acts(id, before, page.size + 1).await;
        let found = found.map_err(Refused::unreadable)?;
        if found.is_empty() && !known {
            return Err(Refused::not_found(parent).into());
        }
        let (found, next_page_token) = page.cut(&list, found, |(place, _)| place.to_string());
        let acts = found.into_iter().map(|(_, act)| act).collect();
        Ok(Response::new(v1::ListActsResponse {
            acts,
            next_page_token,
        }))
    }
}

impl Crossings {
    /// Lets the engine do what an operator asks for, and shows what came of it.
    async fn act(&self, event: Event) -> Result<Response<v1::Crossing>, Status> {
        let (Event::Pin { crossing, .. }
        | Event::Release { crossing, .. }
        | Event::ChangeOver { crossing, .. }) = &event
        else {
            unreachable!("{event:?} is no act of an operator")
        };
        let id = crossing.clone();
        let done = self.0.desk.decide(|_| Ok(event)).await?;
        done.sole()
            .map_err(|refusal| engine::refused(refusal, hand::path_of))?;
        Ok(Response::new(self.shown(&id)?))
    }

    fn shown(&self, id: &Id) -> Result<v1::Crossing, Refused> {
        let view = self.0.board.crossing(id);
        view.map(|view| crossing::view_to_wire(&view))
            .ok_or_else(|| Refused::not_found(names::crossing(id)))
    }

    async fn change(
        &self,
        decide: impl FnOnce(&Engine) -> Result<Event, Refused> + Send + 'static,
    ) -> Result<(), Refused> {
        let done = self.0.desk.decide(decide).await?;
        done.sole()
            .map_err(|refusal| engine::refused(refusal, crossing::path_of))
    }
}

fn current<'a>(
    engine: &'a Engine,
    id: &Id,
    sent_etag: &str,
) -> Result<&'a CrossingDeclaration, Refused> {
    let current = engine
        .crossing(id)
        .ok_or_else(|| Refused::not_found(names::crossing(id)))?;
    etag::check(names::crossing(id), sent_etag, crossing::etag(current))?;
    Ok(current)
}
