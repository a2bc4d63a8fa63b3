//! Settings of the fake, and how tests make them.

use std::pin::Pin;

use ratewright_proto::v1;
use ratewright_ratio::{
    Bounds, Bracket, Cadence, Certificate, Exact, Fraction, MAX_BOUND, Stepping, best, exact,
    residual, target_from_f64,
};
use tokio::sync::broadcast::error::RecvError;
use tokio::sync::mpsc;
use tokio_stream::Stream;
use tokio_stream::wrappers::ReceiverStream;
use tonic::{Request, Response, Status, Streaming};
use v1::certificate::Proof;
use v1::follow_settings_request::Message as Said;
use v1::follow_settings_response::Message;
use v1::ratio_service_server::RatioService;
use v1::setting::Realisation;

use super::{Facility, HOUSE_NS};

fn fraction(ratio: &Fraction) -> v1::Fraction {
    v1::Fraction {
        numerator: ratio.numer().to_string(),
        denominator: ratio.denom().to_string(),
    }
}

fn ratio(ratio: &Fraction) -> v1::Ratio {
    v1::Ratio {
        l: *ratio.numer(),
        m: *ratio.denom(),
    }
}

fn ends(bracket: &Bracket) -> v1::Bracket {
    let end = |node: ratewright_ratio::Node| {
        Some(v1::Fraction {
            numerator: node.l.to_string(),
            denominator: node.m.to_string(),
        })
    };
    v1::Bracket {
        below: end(bracket.below),
        above: end(bracket.above),
    }
}

fn setting(
    crossing: &str,
    (epoch, number): (u64, u64),
    wanted: &Fraction,
    target: f64,
    residual: f64,
) -> v1::Setting {
    v1::Setting {
        name: format!("crossings/{crossing}/settings/{epoch}-{number}"),
        crossing: format!("crossings/{crossing}"),
        epoch,
        number,
        wanted: Some(fraction(wanted)),
        residual,
        decided_ns: HOUSE_NS,
        effect_ns: HOUSE_NS + 1_000_000_000,
        review_ns: HOUSE_NS + 60_000_000_000,
        expiry_ns: HOUSE_NS + 120_000_000_000,
        reason: v1::SettingReason::Evidence.into(),
        evidence: Some(v1::Evidence {
            target,
            ..Default::default()
        }),
        ..Default::default()
    }
}

/// A good setting: the nearest ratio within `max_l`/`max_m` to a wanted one, which is finer.
pub(crate) fn nearest_setting(
    crossing: &str,
    number: (u64, u64),
    target: f64,
    (max_l, max_m): (u64, u64),
) -> v1::Setting {
    let bounds = Bounds::new(max_l, max_m).expect("bounds");
    let exact_target = target_from_f64(target).expect("a target");
    let fine = Bounds::new(MAX_BOUND, MAX_BOUND).expect("the largest");
    let wanted = best(&exact_target, &fine).ratio;
    let answer = best(&exact(&wanted), &bounds);
    let Certificate::Nearest(bracket) = answer.certificate else {
        panic!("plain bounds are certified by a bracket");
    };
    let off = residual(&answer.ratio, &exact_target);
    v1::Setting {
        realisation: Some(Realisation::Single(ratio(&answer.ratio))),
        certificate: Some(v1::Certificate {
            proof: Some(Proof::Nearest(ends(&bracket))),
        }),
        ..setting(crossing, number, &wanted, target, off)
    }
}

/// A good setting that a cadence of two neighbours within `max_l`/`max_m` realises.
pub(crate) fn cadence_setting(
    crossing: &str,
    number: (u64, u64),
    wanted: Fraction,
    (max_l, max_m): (u64, u64),
) -> v1::Setting {
    let bounds = Bounds::new(max_l, max_m).expect("bounds");
    let target: Exact = exact(&wanted);
    let cadence = Cadence::new(&target, &bounds).expect("two neighbours");
    let Certificate::NeighbourPair(bracket) = cadence.certificate(&bounds) else {
        panic!("plain bounds are certified by a pair");
    };
    let wire = v1::Cadence {
        low: Some(ratio(&cadence.low())),
        high: Some(ratio(&cadence.high())),
        low_blocks: cadence.low_blocks(),
        high_blocks: cadence.high_blocks(),
        error_bound_samples: 0.1,
    };
    let target = *wanted.numer() as f64 / *wanted.denom() as f64;
    v1::Setting {
        realisation: Some(Realisation::Cadence(wire)),
        certificate: Some(v1::Certificate {
            proof: Some(Proof::Neighbours(ends(&bracket))),
        }),
        ..setting(crossing, number, &wanted, target, 0.0)
    }
}

/// The same two ratios, each held while the error keeps within `swing_samples`.
pub(crate) fn lazy_setting(
    crossing: &str,
    number: (u64, u64),
    wanted: Fraction,
    bounds: (u64, u64),
    swing_samples: f64,
) -> v1::Setting {
    let balanced = cadence_setting(crossing, number, wanted, bounds);
    let Some(Realisation::Cadence(cadence)) = balanced.realisation else {
        panic!("a cadence was made");
    };
    let cadence = Some(cadence);
    v1::Setting {
        realisation: Some(Realisation::Lazy(v1::Lazy {
            cadence,
            swing_samples,
        })),
        ..balanced
    }
}

/// A good setting of one table of phases.
pub(crate) fn stepping_setting(
    crossing: &str,
    number: (u64, u64),
    wanted: Fraction,
    phases: u64,
) -> v1::Setting {
    let stepping = Stepping::new(&exact(&wanted), phases).expect("enough phases");
    let (advance, longer_advance) = stepping.advances();
    let target = *wanted.numer() as f64 / *wanted.denom() as f64;
    v1::Setting {
        realisation: Some(Realisation::Stepping(v1::Stepping {
            phases,
            advance,
            longer_advance,
            error_bound_samples: 0.1,
        })),
        certificate: Some(v1::Certificate {
            proof: Some(Proof::Stepping(v1::SteppingPair { phases, advance })),
        }),
        ..setting(crossing, number, &wanted, target, 0.0)
    }
}

impl Facility {
    /// What is there now, and then every change.
    fn subscribe(
        &self,
        select: &v1::WatchSettingsRequest,
    ) -> Result<mpsc::Receiver<v1::Setting>, Status> {
        let mut changes = self.changes.subscribe();
        let mut known = self.known();
        known.streams += 1;
        known.newest_known = select.newest_known.clone();
        if let Some(name) = select
            .crossings
            .iter()
            .find(|n| !known.crossings.contains_key(*n))
        {
            return Err(Status::not_found(format!("{name} was never declared")));
        }
        let wanted = select.crossings.clone();
        let selected =
            move |setting: &v1::Setting| wanted.is_empty() || wanted.contains(&setting.crossing);
        let snapshot: Vec<_> = known
            .settings
            .values()
            .filter(|s| selected(s) && !select.newest_known.contains(&s.name))
            .cloned()
            .collect();
        drop(known);
        let (sender, receiver) = mpsc::channel(64);
        tokio::spawn(async move {
            for setting in snapshot {
                let _ = sender.send(setting).await;
            }
            loop {
                match changes.recv().await {
                    Ok(setting) if !selected(&setting) => {}
                    Ok(setting) => {
                        if sender.send(setting).await.is_err() {
                            return;
                        }
                    }
                    Err(RecvError::Lagged(_)) => {}
                    Err(RecvError::Closed) => return,
                }
            }
        });
        Ok(receiver)
    }
}

type Answers<T> = Pin<Box<dyn Stream<Item = Result<T, Status>> + Send>>;

#[tonic::async_trait]
impl RatioService for Facility {
    type WatchSettingsStream = Answers<v1::WatchSettingsResponse>;
    type FollowSettingsStream = Answers<v1::FollowSettingsResponse>;

    async fn watch_settings(
        &self,
        request: Request<v1::WatchSettingsRequest>,
    ) -> Result<Response<Self::WatchSettingsStream>, Status> {
        let mut settings = self.subscribe(&request.into_inner())?;
        let (sender, receiver) = mpsc::channel(64);
        tokio::spawn(async move {
            while let Some(setting) = settings.recv().await {
                let setting = Some(setting);
                let answer = v1::WatchSettingsResponse {
                    setting,
                    house_ns: HOUSE_NS,
                };
                if sender.send(Ok(answer)).await.is_err() {
                    return;
                }
            }
        });
        Ok(Response::new(Box::pin(ReceiverStream::new(receiver))))
    }

    async fn follow_settings(
        &self,
        request: Request<Streaming<v1::FollowSettingsRequest>>,
    ) -> Result<Response<Self::FollowSettingsStream>, Status> {
        let mut said = request.into_inner();
        let first = said.message().await?.and_then(|request| request.message);
        let Some(Said::Select(select)) = first else {
            return Err(Status::invalid_argument("the first message selects"));
        };
        let mut settings = self.subscribe(&select)?;
        let (sender, receiver) = mpsc::channel(64);
        let facility = self.clone();
        tokio::spawn(async move {
            loop {
                let message = tokio::select! {
                    setting = settings.recv() => match setting {
                        Some(setting) => Message::Setting(setting),
                        None => return,
                    },
                    request = said.message() => {
                        let Ok(Some(request)) = request else { return };
                        let Some(message) = request.message else { continue };
                        facility.known().follower_said.push(message.clone());
                        match message {
                            Said::Occupancy(occupancy) if occupancy.deviation_samples <= 0.0 => {
                                Message::Refused(v1::FollowRefusal {
                                    field: "occupancy.deviation_samples".to_owned(),
                                    value: occupancy.deviation_samples.to_string(),
                                    accepted: "above 0".to_owned(),
                                    crossing: occupancy.crossing,
                                    report: 1,
                                })
                            }
                            _ => continue,
                        }
                    }
                };
                let message = Some(message);
                let answer = v1::FollowSettingsResponse {
                    message,
                    house_ns: HOUSE_NS,
                };
                if sender.send(Ok(answer)).await.is_err() {
                    return;
                }
            }
        });
        Ok(Response::new(Box::pin(ReceiverStream::new(receiver))))
    }

    async fn get_setting(
        &self,
        request: Request<v1::GetSettingRequest>,
    ) -> Result<Response<v1::Setting>, Status> {
        let name = request.into_inner().name;
        let (crossing, _) = name.split_once("/settings/").unwrap_or((&name, ""));
        let setting = self.known().settings.get(crossing).cloned();
        setting
            .map(Response::new)
            .ok_or_else(|| Status::not_found(format!("no {name}")))
    }

    async fn explain_setting(
        &self,
        request: Request<v1::ExplainSettingRequest>,
    ) -> Result<Response<v1::ExplainSettingResponse>, Status> {
        let name = request.into_inner().name;
        let setting = self
            .get_setting(Request::new(v1::GetSettingRequest { name }))
            .await?;
        let lines = vec!["It is the nearest within the bounds.".to_owned()];
        let setting = Some(setting.into_inner());
        Ok(Response::new(v1::ExplainSettingResponse { setting, lines }))
    }

    async fn list_settings(
        &self,
        _: Request<v1::ListSettingsRequest>,
    ) -> Result<Response<v1::ListSettingsResponse>, Status> {
        Err(Status::unimplemented("the fake keeps no history"))
    }

    async fn plan_ratio(
        &self,
        _: Request<v1::PlanRatioRequest>,
    ) -> Result<Response<v1::PlanRatioResponse>, Status> {
        Err(Status::unimplemented("the fake plans nothing"))
    }
}
