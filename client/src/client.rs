//! Connecting, and the calls that ask once.

mod hand;

use std::future::Future;
use std::sync::Arc;

use ratewright_proto::v1;
use ratewright_ratio::Bounds;
use tonic::transport::Channel;
use tonic::{Request, Response, Status};
use v1::clock_service_client::ClockServiceClient;
use v1::crossing_service_client::CrossingServiceClient;
use v1::ratio_service_client::RatioServiceClient;
use v1::reading_service_client::ReadingServiceClient;

use crate::hosts::Hosts;
use crate::wire::{WireError, clock_name, crossing_name, setting_name};
use crate::{
    CallError, Clock, ClockDeclaration, Crossing, CrossingDeclaration, Exchange, Follow, Id,
    Receipts, ReportOptions, Reporter, Setting, SettingNumber, Watch, report, transport,
};

/// Resources on a page when listing.
const PAGE: i32 = 500;

/// A connection to a daemon. Clones share it.
#[derive(Clone, Debug)]
pub struct Client {
    hosts: Arc<Hosts>,
}

impl Client {
    /// Connects to a daemon, such as `http://127.0.0.1:7420`, and waits until the connection is up.
    ///
    /// Later losses of contact are mended: streams reconnect by themselves, other calls fail and
    /// may be made again.
    ///
    /// # Errors
    /// [`CallError::Unreachable`] if nobody answers there within 5 s.
    pub async fn connect(address: &str) -> Result<Self, CallError> {
        Self::connect_any(&[address]).await
    }

    /// Connects to the first that answers of several daemons that serve the same facility,
    /// beginning at a random one. Whenever contact is lost, the next address is tried.
    ///
    /// # Errors
    /// [`CallError::Unreachable`] if none answers; it speaks of the last that was tried.
    pub async fn connect_any(addresses: &[&str]) -> Result<Self, CallError> {
        let hosts = Arc::new(Hosts::connect(addresses).await?);
        Ok(Self { hosts })
    }

    /// As [`Client::connect_any`], without waiting: for a player that has to start while no daemon
    /// answers. Streams connect when they can.
    ///
    /// # Errors
    /// [`CallError::Unreachable`] only for what is no address.
    pub fn connect_later(addresses: &[&str]) -> Result<Self, CallError> {
        let hosts = Arc::new(Hosts::later(addresses)?);
        Ok(Self { hosts })
    }

    /// The address in use, as it was given.
    pub fn address(&self) -> &str {
        self.hosts.address(self.hosts.place())
    }

    pub(crate) fn hosts(&self) -> &Hosts {
        &self.hosts
    }

    /// A clock and its estimate.
    ///
    /// # Errors
    /// [`RefusalKind::NotFound`](crate::RefusalKind::NotFound) if it was never declared.
    pub async fn clock(&self, id: &Id) -> Result<Clock, CallError> {
        let request = v1::GetClockRequest {
            name: clock_name(id),
        };
        let clock = self
            .answer(self.clock_stub().get_clock(timed(request)))
            .await?;
        Ok(clock.try_into()?)
    }

    /// All clocks, in the order of their names.
    ///
    /// # Errors
    /// See [`CallError`].
    pub async fn clocks(&self) -> Result<Vec<Clock>, CallError> {
        let (mut clocks, mut page_token) = (Vec::new(), String::new());
        loop {
            let request = v1::ListClocksRequest {
                page_size: PAGE,
                page_token,
            };
            let page = self
                .answer(self.clock_stub().list_clocks(timed(request)))
                .await?;
            for clock in page.clocks {
                clocks.push(clock.try_into()?);
            }
            page_token = page.next_page_token;
            if page_token.is_empty() {
                return Ok(clocks);
            }
        }
    }

    /// Declares a clock.
    ///
    /// # Errors
    /// [`RefusalKind::AlreadyExists`](crate::RefusalKind::AlreadyExists) if the id is taken;
    /// [`RefusalKind::Invalid`](crate::RefusalKind::Invalid) names the field at fault.
    pub async fn declare_clock(&self, clock: &ClockDeclaration) -> Result<Clock, CallError> {
        let request = v1::CreateClockRequest {
            clock: Some(clock.into()),
        };
        let clock = self
            .answer(self.clock_stub().create_clock(timed(request)))
            .await?;
        Ok(clock.try_into()?)
    }

    /// A crossing and its status.
    ///
    /// # Errors
    /// [`RefusalKind::NotFound`](crate::RefusalKind::NotFound) if it was never declared.
    pub async fn crossing(&self, id: &Id) -> Result<Crossing, CallError> {
        Ok(self.crossing_message(id).await?.try_into()?)
    }

    /// All crossings, in the order of their names.
    ///
    /// # Errors
    /// See [`CallError`].
    pub async fn crossings(&self) -> Result<Vec<Crossing>, CallError> {
        let (mut crossings, mut page_token) = (Vec::new(), String::new());
        loop {
            let request = v1::ListCrossingsRequest {
                page_size: PAGE,
                page_token,
            };
            let page = self
                .answer(self.crossing_stub().list_crossings(timed(request)))
                .await?;
            for crossing in page.crossings {
                crossings.push(crossing.try_into()?);
            }
            page_token = page.next_page_token;
            if page_token.is_empty() {
                return Ok(crossings);
            }
        }
    }

    /// Declares a crossing.
    ///
    /// # Errors
    /// As [`Client::declare_clock`].
    pub async fn declare_crossing(
        &self,
        crossing: &CrossingDeclaration,
    ) -> Result<Crossing, CallError> {
        let request = v1::CreateCrossingRequest {
            crossing: Some(crossing.into()),
        };
        let crossing = self
            .answer(self.crossing_stub().create_crossing(timed(request)))
            .await?;
        Ok(crossing.try_into()?)
    }

    /// A setting of a crossing: that of this number, or the newest. It is not verified: see
    /// [`Setting::verify`], which needs the bounds of the crossing.
    ///
    /// # Errors
    /// [`RefusalKind::NotFound`](crate::RefusalKind::NotFound) if there never was one.
    pub async fn setting(
        &self,
        crossing: &Id,
        number: Option<SettingNumber>,
    ) -> Result<Setting, CallError> {
        let request = v1::GetSettingRequest {
            name: setting_name(crossing, number),
        };
        let setting = self
            .answer(self.ratio_stub().get_setting(timed(request)))
            .await?;
        Ok(setting.try_into()?)
    }

    /// A setting, as [`Client::setting`], and the daemon's explanation of it, a line an element.
    ///
    /// # Errors
    /// As [`Client::setting`].
    pub async fn explain(
        &self,
        crossing: &Id,
        number: Option<SettingNumber>,
    ) -> Result<(Setting, Vec<String>), CallError> {
        let request = v1::ExplainSettingRequest {
            name: setting_name(crossing, number),
        };
        let answer = self
            .answer(self.ratio_stub().explain_setting(timed(request)))
            .await?;
        let setting = answer.setting.ok_or_else(|| WireError {
            field: "setting".to_owned(),
            value: String::new(),
            accepted: "a setting",
        })?;
        Ok((setting.try_into()?, answer.lines))
    }

    /// Exchanges timestamps with the daemon's house time. `clock_ns` reads the caller's clock, ns;
    /// it is read last before sending and first after the answer. House time at a reading of that
    /// clock is the reading minus [`Exchange::ahead_ns`], good to half of [`Exchange::round_trip_ns`].
    ///
    /// # Errors
    /// See [`CallError`].
    pub async fn exchange_time(
        &self,
        mut clock_ns: impl FnMut() -> i64,
    ) -> Result<Exchange, CallError> {
        let place = self.hosts.place();
        let mut stub = self.reading_stub();
        let t1_ns = clock_ns();
        let answer = stub
            .exchange_time(timed(v1::ExchangeTimeRequest { t1_ns }))
            .await;
        let t4_ns = clock_ns();
        let answer = answer.map_err(|status| self.hosts.error(place, &status))?;
        let answer = answer.into_inner();
        Ok(Exchange {
            t1_ns,
            t2_ns: answer.t2_ns,
            t3_ns: answer.t3_ns,
            t4_ns,
        })
    }

    /// Opens a stream for readings. Must be called within a tokio runtime.
    pub fn report(&self, options: ReportOptions) -> (Reporter, Receipts) {
        report::open(self.clone(), options)
    }

    /// Watches the settings of these crossings, or of all if there are none, those declared later
    /// included.
    pub fn watch(&self, crossings: &[Id]) -> Watch {
        Watch::new(self.clone(), crossings)
    }

    /// As [`Client::watch`], for a follower that applies the settings and says so.
    pub fn follow(&self, crossings: &[Id]) -> Follow {
        Follow::new(self.clone(), crossings)
    }

    /// The bounds of a crossing as it is declared now.
    pub(crate) async fn bounds(&self, id: &Id) -> Result<Bounds, CallError> {
        let crossing = self.crossing_message(id).await?;
        let bounds = (crossing.max_l, crossing.max_m);
        Ok(Bounds::new(bounds.0, bounds.1).map_err(|_| WireError {
            field: "crossing.max_l, max_m".to_owned(),
            value: format!("{bounds:?}"),
            accepted: "bounds from 1 to 2^31",
        })?)
    }

    async fn crossing_message(&self, id: &Id) -> Result<v1::Crossing, CallError> {
        let request = v1::GetCrossingRequest {
            name: crossing_name(id),
        };
        self.answer(self.crossing_stub().get_crossing(timed(request)))
            .await
    }

    fn clock_stub(&self) -> ClockServiceClient<Channel> {
        ClockServiceClient::new(self.channel())
    }

    fn crossing_stub(&self) -> CrossingServiceClient<Channel> {
        CrossingServiceClient::new(self.channel())
    }

    pub(crate) fn ratio_stub(&self) -> RatioServiceClient<Channel> {
        RatioServiceClient::new(self.channel())
    }

    pub(crate) fn reading_stub(&self) -> ReadingServiceClient<Channel> {
        ReadingServiceClient::new(self.channel())
    }

    fn channel(&self) -> Channel {
        self.hosts.channel(self.hosts.place())
    }

    async fn answer<T>(
        &self,
        call: impl Future<Output = Result<Response<T>, Status>>,
    ) -> Result<T, CallError> {
        let place = self.hosts.place();
        call.await
            .map(Response::into_inner)
            .map_err(|status| self.hosts.error(place, &status))
    }
}

/// A unary request with a deadline.
fn timed<T>(message: T) -> Request<T> {
    let mut request = Request::new(message);
    request.set_timeout(transport::CALL_TIMEOUT);
    request
}
