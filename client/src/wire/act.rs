//! Acts of operators in.

use ratewright_proto::v1;
use v1::act::What;

use super::name::id_of;
use super::{WireError, required};
use crate::{Act, ActKind};

impl TryFrom<v1::Act> for Act {
    type Error = WireError;

    fn try_from(wire: v1::Act) -> Result<Self, WireError> {
        let what = match required("act.what", wire.what)? {
            What::Pinned(v1::Pinned {}) => ActKind::Pinned,
            What::Released(v1::Released {}) => ActKind::Released,
            What::ChangedOver(v1::ChangedOver {
                from_clock,
                to_clock,
            }) => ActKind::ChangedOver {
                from: id_of("act.changed_over.from_clock", "clocks", &from_clock)?,
                to: id_of("act.changed_over.to_clock", "clocks", &to_clock)?,
            },
        };
        Ok(Self {
            crossing: id_of("act.crossing", "crossings", &wire.crossing)?,
            by: wire.by,
            note: wire.note,
            at_ns: wire.at_ns,
            what,
        })
    }
}
