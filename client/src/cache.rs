//! The newest settings on disk, so that a player that starts while no daemon answers runs what it
//! ran before.
//!
//! A file a crossing, replaced whole: written beside its place, synced, and moved there. What is read
//! back is checked as if it came over the wire: a checksum, the contract, the certificate.
//!
//! With each goes the moment at which it was kept, by house time and by this machine's system clock, so
//! that a player that starts alone can tell whether what it runs has expired meanwhile.

use std::fs;
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};
use std::time::{SystemTime, UNIX_EPOCH};

use prost::Message as _;
use ratewright_proto::v1;
use ratewright_ratio::Bounds;

use crate::{Id, Setting};

/// How a file begins; the last byte is the version of the layout.
const MAGIC: &[u8; 8] = b"rwcache\x02";

/// Bytes before the setting: magic, checksum, the bounds it was verified against, and the moment.
const HEAD: usize = 48;

/// What was kept of a crossing.
#[derive(Clone, Debug)]
pub(crate) struct Kept {
    pub(crate) setting: Setting,
    /// What it was verified against.
    pub(crate) bounds: Bounds,
    /// When it was kept.
    pub(crate) moment: Moment,
}

/// One instant by two clocks, ns.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Moment {
    pub(crate) house_ns: i64,
    pub(crate) system_ns: i64,
}

impl Moment {
    /// House time when the system clock shows `system_ns`; `None` if that is before this moment: the
    /// clock was set back, or has not been set since the machine started.
    pub(crate) fn house_ns_at(self, system_ns: i64) -> Option<i64> {
        let since_ns = system_ns.saturating_sub(self.system_ns);
        (since_ns >= 0).then(|| self.house_ns.saturating_add(since_ns))
    }
}

/// What this machine's system clock shows, ns since 1970.
pub(crate) fn system_now_ns() -> i64 {
    let since = SystemTime::now().duration_since(UNIX_EPOCH);
    since.map_or(0, |since| {
        i64::try_from(since.as_nanos()).unwrap_or(i64::MAX)
    })
}

/// A folder of settings.
#[derive(Clone, Debug)]
pub(crate) struct Cache {
    folder: PathBuf,
}

impl Cache {
    pub(crate) fn new(folder: &Path) -> Self {
        Self {
            folder: folder.to_owned(),
        }
    }

    /// What was kept of a crossing, if it holds.
    pub(crate) fn read(&self, crossing: &Id) -> Option<Kept> {
        let bytes = fs::read(self.place(crossing)).ok()?;
        let kept = unpack(&bytes)?;
        let holds = kept.setting.crossing == *crossing && kept.setting.verify(&kept.bounds).is_ok();
        holds.then_some(kept)
    }

    /// Keeps a setting that was verified against `bounds`, and the present moment.
    pub(crate) fn write(
        &self,
        crossing: &Id,
        setting: &v1::Setting,
        bounds: &Bounds,
        moment: Moment,
    ) -> io::Result<()> {
        fs::create_dir_all(&self.folder)?;
        let place = self.place(crossing);
        let beside = place.with_extension("new");
        let mut file = fs::File::create(&beside)?;
        file.write_all(&pack(setting, bounds, moment))?;
        file.sync_all()?;
        fs::rename(&beside, &place)
    }

    fn place(&self, crossing: &Id) -> PathBuf {
        self.folder.join(format!("{crossing}.setting"))
    }
}

fn pack(setting: &v1::Setting, bounds: &Bounds, moment: Moment) -> Vec<u8> {
    let mut content = Vec::new();
    content.extend(bounds.max_l().to_le_bytes());
    content.extend(bounds.max_m().to_le_bytes());
    content.extend(moment.house_ns.to_le_bytes());
    content.extend(moment.system_ns.to_le_bytes());
    content.extend(setting.encode_to_vec());
    let mut bytes = MAGIC.to_vec();
    bytes.extend(checksum(&content).to_le_bytes());
    bytes.extend(content);
    bytes
}

fn unpack(bytes: &[u8]) -> Option<Kept> {
    let head = bytes.get(..HEAD)?;
    let word = |at: usize| Some(u64::from_le_bytes(head.get(at..at + 8)?.try_into().ok()?));
    if &head[..8] != MAGIC || word(8)? != checksum(&bytes[16..]) {
        return None;
    }
    let bounds = Bounds::new(word(16)?, word(24)?).ok()?;
    let moment = Moment {
        house_ns: word(32)?.cast_signed(),
        system_ns: word(40)?.cast_signed(),
    };
    let setting = v1::Setting::decode(&bytes[HEAD..]).ok()?;
    Some(Kept {
        setting: setting.try_into().ok()?,
        bounds,
        moment,
    })
}

/// FNV-1a, 64 bits: against a disk's faults, not against people.
fn checksum(bytes: &[u8]) -> u64 {
    bytes.iter().fold(0xcbf2_9ce4_8422_2325, |hash, byte| {
        (hash ^ u64::from(*byte)).wrapping_mul(0x0100_0000_01b3)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_damaged_or_not_proven_is_not_read() {
        assert_eq!(checksum(b"a"), 0xaf63_dc4c_8601_ec8c, "FNV-1a test vector");
        let bounds = Bounds::new(16, 16).expect("in range");
        let moment = Moment {
            house_ns: 5,
            system_ns: 7,
        };
        let bytes = pack(&v1::Setting::default(), &bounds, moment);
        assert!(
            unpack(&bytes).is_none(),
            "an empty setting breaks the contract"
        );
        for cut in 0..bytes.len() {
            assert!(unpack(&bytes[..cut]).is_none(), "{cut}");
        }
    }

    #[test]
    fn house_time_goes_on_by_the_system_clock_unless_that_is_behind() {
        let moment = Moment {
            house_ns: 5_000,
            system_ns: 700,
        };
        assert_eq!(moment.house_ns_at(700), Some(5_000));
        assert_eq!(moment.house_ns_at(900), Some(5_200));
        assert_eq!(moment.house_ns_at(i64::MAX), Some(i64::MAX), "no wrap");
        assert_eq!(moment.house_ns_at(699), None);
        assert!(system_now_ns() > 1_700_000_000_000_000_000);
    }
}
