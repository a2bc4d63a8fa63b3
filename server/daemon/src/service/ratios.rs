//! RatioService.

use ratewright_proto::v1::{
    self, follow_settings_request::Message, ratio_service_server::RatioService,
};
use tonic::{Request, Response, Status, Streaming};

use super::{Access, Answers, feed, follow, leave::Leave, paging, plan, slots::Kind};
use crate::{
    convert::{
        names::{self, SettingName},
        setting::setting_to_wire,
    },
    refused::{Refused, Violation},
    store::Recorded,
};

#[derive(Debug)]
pub(super) struct Ratios(pub(super) Access);

#[tonic::async_trait]
impl RatioService for Ratios {
    type WatchSettingsStream = Answers<v1::WatchSettingsResponse>;
    type FollowSettingsStream = Answers<v1::FollowSettingsResponse>;

    async fn plan_ratio(
        &self,
        request: Request<v1::PlanRatioRequest>,
    ) -> Result<Response<v1::PlanRatioResponse>, Status> {
        Ok(Response::new(plan::plan(request.into_inner()).await?))
    }

    async fn get_setting(
        &self,
        request: Request<v1::GetSettingRequest>,
    ) -> Result<Response<v1::Setting>, Status> {
        let name = &request.get_ref().name;
        let SettingName { crossing, numbered } = names::parse_setting("name", name)?;
        // The newest is on the board. What is older, or of a crossing that is silent or gone, is looked up.
        let newest = self.0.board.newest_setting(&crossing);
        if let Some(newest) = newest.filter(|_| numbered.is_none()) {
            return Ok(Response::new(setting_to_wire(&newest)));
        }
        Ok(Response::new(self.recorded(name).await?.setting))
    }

    async fn list_settings(
        &self,
        request: Request<v1::ListSettingsRequest>,
    ) -> Result<Response<v1::ListSettingsResponse>, Status> {
        let v1::ListSettingsRequest {
            parent,
            page_size,
            page_token,
        } = request.into_inner();
        let crossing = names::parse_crossing("parent", &parent)?;
        let page = paging::page(&parent, page_size, &page_token)?;
        let before = page.after.as_deref().and_then(numbers);
        let known = self.0.board.crossing(&crossing).is_some();
        let found = self
            .0
            .history
            .settings(crossing, before, page.size + 1)
            .await;
        let settings: Vec<v1::Setting> = found
            .map_err(Refused::unreadable)?
            .into_iter()
            .map(|recorded| recorded.setting)
            .collect();
        if settings.is_empty() && !known {
            return Err(Refused::not_found(parent).into());
        }
        let (settings, next_page_token) = page.cut(&parent, settings, |last| {
            format!("{}-{}", last.epoch, last.number)
        });
        Ok(Response::new(v1::ListSettingsResponse {
            settings,
            next_page_token,
        }))
    }

    async fn watch_settings(
        &self,
        request: Request<v1::WatchSettingsRequest>,
    ) -> Result<Response<Self::WatchSettingsStream>, Status> {
        let board = self.0.board.clone();
        let selection = feed::selection(&board, request.get_ref(), "crossings")?;
        let known = feed::known(request.get_ref(), "newest_known")?;
        let slot = self.0.slots.take(Kind::Watch)?;
        let leave = Leave::of(&self.0, &request);
        let feed = feed::Feed::new(board, selection, known);
        let settings = follow::watch(self.0.clone(), feed, slot, leave);
        Ok(Response::new(settings))
    }

    async fn follow_settings(
        &self,
        request: Request<Streaming<v1::FollowSettingsRequest>>,
    ) -> Result<Response<Self::FollowSettingsStream>, Status> {
        let slot = self.0.slots.take(Kind::Follow)?;
        let leave = Leave::of(&self.0, &request);
        let mut reports = request.into_inner();
        let first = tokio::select! {
            first = reports.message() => first?,
            why = leave.due() => return Err(why.into()),
        };
        let Some(Message::Select(select)) = first.and_then(|first| first.message) else {
            let accepted = "select, in the first message";
            return Err(Violation::new("message", "absent or another kind", accepted).into());
        };
        let board = self.0.board.clone();
        let selection = feed::selection(&board, &select, "select.crossings")?;
        let known = feed::known(&select, "select.newest_known")?;
        let feed = feed::Feed::new(board, selection, known);
        Ok(Response::new(follow::follow(
            self.0.clone(),
            feed,
            reports,
            slot,
            leave,
        )))
    }

    async fn explain_setting(
        &self,
        request: Request<v1::ExplainSettingRequest>,
    ) -> Result<Response<v1::ExplainSettingResponse>, Status> {
        let Recorded {
            setting,
            explanation,
        } = self.recorded(&request.get_ref().name).await?;
        let (setting, lines) = (Some(setting), explanation);
        Ok(Response::new(v1::ExplainSettingResponse { setting, lines }))
    }
}

impl Ratios {
    async fn recorded(&self, name: &str) -> Result<Recorded, Refused> {
        let SettingName { crossing, numbered } = names::parse_setting("name", name)?;
        let found = self
            .0
            .history
            .setting(crossing, numbered)
            .await
            .map_err(Refused::unreadable)?;
        found.ok_or_else(|| Refused::not_found(name))
    }
}

/// Where a page of settings ended.
fn numbers(after: &str) -> Option<(u64, u64)> {
    let (epoch, number) = after.split_once('-')?;
    Some((epoch.parse().ok()?, number.parse().ok()?))
}
