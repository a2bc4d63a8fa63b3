//! The newest settings on disk, so that a player that starts while no daemon answers runs what it
//! ran before.
//!
//! A file a crossing, replaced whole: written beside its place, synced, and moved there. What is read
//! back is checked as if it came over the wire: a checksum, the contract, the certificate.

use std::fs;
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};

use prost::Message as _;
use ratewright_proto::v1;
use ratewright_ratio::Bounds;

use crate::{Id, Setting};

/// How a file begins; the last byte is the version of the layout.
const MAGIC: &[u8; 8] = b"rwcache\x01";

/// Bytes before the setting: magic, checksum, and the bounds it was verified against.
const HEAD: usize = 32;

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

    /// The setting that was kept of a crossing, and its bounds, if there is one that holds.
    pub(crate) fn read(&self, crossing: &Id) -> Option<(Setting, Bounds)> {
        let bytes = fs::read(self.place(crossing)).ok()?;
        let (setting, bounds) = unpack(&bytes)?;
        (setting.crossing == *crossing && setting.verify(&bounds).is_ok())
            .then_some((setting, bounds))
    }

    /// Keeps a setting that was verified against `bounds`.
    pub(crate) fn write(
        &self,
        crossing: &Id,
        setting: &v1::Setting,
        bounds: &Bounds,
    ) -> io::Result<()> {
        fs::create_dir_all(&self.folder)?;
        let place = self.place(crossing);
        let beside = place.with_extension("new");
        let mut file = fs::File::create(&beside)?;
        file.write_all(&pack(setting, bounds))?;
        file.sync_all()?;
        fs::rename(&beside, &place)
    }

    fn place(&self, crossing: &Id) -> PathBuf {
        self.folder.join(format!("{crossing}.setting"))
    }
}

fn pack(setting: &v1::Setting, bounds: &Bounds) -> Vec<u8> {
    let mut content = Vec::new();
    content.extend(bounds.max_l().to_le_bytes());
    content.extend(bounds.max_m().to_le_bytes());
    content.extend(setting.encode_to_vec());
    let mut bytes = MAGIC.to_vec();
    bytes.extend(checksum(&content).to_le_bytes());
    bytes.extend(content);
    bytes
}

fn unpack(bytes: &[u8]) -> Option<(Setting, Bounds)> {
    let head = bytes.get(..HEAD)?;
    let word = |at: usize| Some(u64::from_le_bytes(head.get(at..at + 8)?.try_into().ok()?));
    if &head[..8] != MAGIC || word(8)? != checksum(&bytes[16..]) {
        return None;
    }
    let bounds = Bounds::new(word(16)?, word(24)?).ok()?;
    let setting = v1::Setting::decode(&bytes[HEAD..]).ok()?;
    Some((setting.try_into().ok()?, bounds))
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
        let bytes = pack(&v1::Setting::default(), &bounds);
        assert!(
            unpack(&bytes).is_none(),
            "an empty setting breaks the contract"
        );
        for cut in 0..bytes.len() {
            assert!(unpack(&bytes[..cut]).is_none(), "{cut}");
        }
    }
}
