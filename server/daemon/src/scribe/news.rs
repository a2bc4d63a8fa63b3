//! What has to be shown anew after a group.

use std::collections::BTreeSet;

use ratewright_control::{Effects, Engine, Event, HouseNs, Id, Setting};

use crate::board::{Applied, ClockView, CrossingView, News};

/// Clocks and crossings that a group has touched.
#[derive(Debug, Default)]
pub(super) struct Touched {
    clocks: BTreeSet<Id>,
    crossings: BTreeSet<Id>,
    applied: Vec<Applied>,
}

impl Touched {
    /// Everything there is.
    pub(super) fn all(engine: &Engine) -> Self {
        Self {
            clocks: engine.clocks().map(|clock| clock.id.clone()).collect(),
            crossings: engine
                .crossings()
                .map(|crossing| crossing.id.clone())
                .collect(),
            applied: Vec::new(),
        }
    }

    /// Notes what an event has touched. A reading touches its own clock only: what else rests on
    /// it is shown anew within a second.
    pub(super) fn note(&mut self, engine: &Engine, event: &Event, effects: &Effects) {
        match event {
            Event::DeclareClock(clock) => {
                self.clocks.insert(clock.id.clone());
                let between = engine.crossings().filter(|c| {
                    [&c.source, &c.sink].contains(&&clock.id)
                        || c.backup.as_ref() == Some(&clock.id)
                });
                self.crossings
                    .extend(between.map(|crossing| crossing.id.clone()));
            }
            Event::Reading(reading) if !self.clocks.contains(&reading.clock) => {
                self.clocks.insert(reading.clock.clone());
            }
            Event::DeleteClock(id) => drop(self.clocks.insert(id.clone())),
            Event::DeclareCrossing(crossing) => drop(self.crossings.insert(crossing.id.clone())),
            Event::DeleteCrossing(id)
            | Event::Applied { crossing: id, .. }
            | Event::Pin { crossing: id, .. }
            | Event::Release { crossing: id, .. }
            | Event::ChangeOver { crossing: id, .. }
            | Event::Occupancy { crossing: id, .. } => drop(self.crossings.insert(id.clone())),
            Event::Reading(_) | Event::Tick | Event::OpenEpoch { .. } => {}
        }
        if let Event::Applied {
            crossing,
            epoch,
            number,
            house_ns,
            ..
        } = event
        {
            self.applied.push(Applied {
                crossing: crossing.clone(),
                setting: (*epoch, *number),
                house_ns: *house_ns,
            });
        }
        self.crossings.extend(
            effects
                .settings
                .iter()
                .map(|setting| setting.crossing.clone()),
        );
    }

    /// The news as of now: what is no longer there is gone.
    pub(super) fn news(self, engine: &Engine, settings: Vec<Setting>, now: HouseNs) -> News {
        let mut news = News {
            settings,
            applied: self.applied,
            ..News::default()
        };
        for id in self.clocks {
            match clock_view(engine, &id, now) {
                Some(view) => news.clocks.push(view),
                None => news.clocks_gone.push(id),
            }
        }
        for id in self.crossings {
            match crossing_view(engine, &id, now) {
                Some(view) => news.crossings.push(view),
                None => {
                    // Made and deleted in one group: nobody needs to hear of it any more.
                    news.settings.retain(|setting| setting.crossing != id);
                    news.crossings_gone.push(id);
                }
            }
        }
        news
    }
}

fn clock_view(engine: &Engine, id: &Id, as_of_ns: HouseNs) -> Option<ClockView> {
    let declaration = engine.clock(id)?.clone();
    let estimate = engine.estimate(id, as_of_ns)?;
    Some(ClockView {
        declaration,
        estimate,
        as_of_ns,
    })
}

fn crossing_view(engine: &Engine, id: &Id, as_of_ns: HouseNs) -> Option<CrossingView> {
    let declaration = engine.crossing(id)?.clone();
    let status = engine.status(id, as_of_ns)?;
    Some(CrossingView {
        declaration,
        status,
        as_of_ns,
    })
}
