//! Recovery: from what the store holds to an engine that goes on, with the configured declarations.

use ratewright_control::{ClockDeclaration, CrossingDeclaration, Engine, Event, HouseNs, Refusal};

use super::group::Group;
use crate::{
    refused::{Refused, Violation},
    store::{Begin, Store, StoreError},
};

/// What the configuration declares.
#[derive(Clone, Debug, Default)]
pub(crate) struct Declared {
    pub(crate) clocks: Vec<ClockDeclaration>,
    pub(crate) crossings: Vec<CrossingDeclaration>,
}

/// Why the engine could not be brought back.
#[derive(Debug, thiserror::Error)]
pub enum RecoverFault {
    /// The journal does not fit the engine.
    #[error(
        "an event of the journal was refused in replay ({0}): the store is damaged; restore a \
         backup and start with --new-epoch"
    )]
    Replay(Refusal),
    /// The engine refused a declaration of the configuration, or one that was stored.
    #[error("the declaration of {name} was refused: {refusal}")]
    Declaration {
        /// Name of what was declared.
        name: String,
        /// Why.
        refusal: Refusal,
    },
    /// A fault of this program.
    #[error("the engine stopped while it was brought back; the log tells where")]
    Panicked,
    /// The store failed.
    #[error(transparent)]
    Store(#[from] StoreError),
}

/// Brings the engine to where it was, applies what the configuration declares anew, and writes
/// that down.
pub(super) fn recover(
    store: &mut Store,
    begin: Begin,
    declared: &Declared,
    now: HouseNs,
) -> Result<Engine, RecoverFault> {
    let mut group = Group::default();
    match begin {
        Begin::Continue {
            engine,
            journal,
            new_epoch,
        } => {
            let mut engine = replay(*engine, journal)?;
            if let Some(epoch) = new_epoch {
                tracing::info!(epoch, "a new epoch begins; estimates and ledgers go on");
                let open = vec![Event::OpenEpoch { epoch }];
                if let Some((_, refusal)) = group.apply(&mut engine, open, now).pop() {
                    return Err(RecoverFault::Replay(refusal));
                }
            }
            let configured = differing(&engine, declared);
            declare(&mut engine, &mut group, configured, now)?;
            if !group.written.is_empty() {
                store.commit(&group.written)?;
            }
            Ok(engine)
        }
        Begin::Afresh {
            epoch,
            declarations,
        } => {
            let fresh = Engine::new(epoch);
            tracing::info!(
                epoch,
                declarations = declarations.len(),
                "the engine begins afresh"
            );
            let mut engine = fresh.clone();
            declare(&mut engine, &mut group, declarations, now)?;
            let configured = differing(&engine, declared);
            declare(&mut engine, &mut group, configured, now)?;
            store.begin_afresh(&fresh, epoch, now, &group.written)?;
            Ok(engine)
        }
    }
}

fn replay(mut engine: Engine, journal: Vec<(HouseNs, Event)>) -> Result<Engine, RecoverFault> {
    let events = journal.len();
    for (house_ns, event) in journal {
        engine
            .apply(&event, house_ns)
            .map_err(RecoverFault::Replay)?;
    }
    tracing::info!(events, "journal replayed");
    Ok(engine)
}

/// What the configuration declares otherwise than the engine has it: clocks first, because
/// crossings need them.
fn differing(engine: &Engine, declared: &Declared) -> Vec<Event> {
    let clocks = declared
        .clocks
        .iter()
        .filter(|clock| engine.clock(&clock.id) != Some(*clock));
    let crossings = declared
        .crossings
        .iter()
        .filter(|crossing| engine.crossing(&crossing.id) != Some(*crossing));
    let clocks = clocks.cloned().map(Event::DeclareClock);
    clocks
        .chain(crossings.cloned().map(Event::DeclareCrossing))
        .collect()
}

/// The same, once it is sure that the engine takes every one of them; tried on a copy.
pub(super) fn all_or_none(engine: &Engine, declared: &Declared) -> Result<Vec<Event>, Refused> {
    let events = differing(engine, declared);
    let mut trial = engine.clone();
    for event in &events {
        // An instant before the newest counts as that one.
        if let Err(refusal) = trial.apply(event, HouseNs::MIN) {
            let field = format!("{}: {}", name_of(event), refusal.field);
            return Err(Violation::new(field, refusal.value, refusal.accepted).into());
        }
    }
    Ok(events)
}

/// The name of what an event declares.
fn name_of(event: &Event) -> String {
    match event {
        Event::DeclareClock(clock) => format!("clocks/{}", clock.id),
        Event::DeclareCrossing(crossing) => format!("crossings/{}", crossing.id),
        other => unreachable!("{other:?} declares nothing"),
    }
}

fn declare(
    engine: &mut Engine,
    group: &mut Group,
    declarations: Vec<Event>,
    now: HouseNs,
) -> Result<(), RecoverFault> {
    for event in declarations {
        let name = name_of(&event);
        if let Some((_, refusal)) = group.apply(engine, vec![event], now).pop() {
            return Err(RecoverFault::Declaration { name, refusal });
        }
    }
    Ok(())
}
