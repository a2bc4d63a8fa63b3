//! Etags: a caller that read before it writes is told if somebody else wrote meanwhile.

use crate::refused::Refused;

/// Refuses a stale etag; an empty one is not checked.
pub(super) fn check(name: String, sent: &str, current: String) -> Result<(), Refused> {
    if sent.is_empty() || sent == current {
        Ok(())
    } else {
        Err(Refused::StaleEtag {
            name,
            sent: sent.into(),
            current,
        })
    }
}
