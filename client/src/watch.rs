//! Hearing of settings.

use std::path::Path;

use crate::feed::Feed;
use crate::{CallError, Client, Freshness, Id, Setting, Update};

/// The settings of a selection of crossings: the newest of each first, then every change.
///
/// A reader that is slow gets the latest of each crossing, not every one. Contact is regained by
/// itself after [`Update::Lost`].
#[derive(Debug)]
pub struct Watch {
    feed: Feed,
}

impl Watch {
    pub(crate) fn new(client: Client, crossings: &[Id]) -> Self {
        Self {
            feed: Feed::new(client, crossings, None),
        }
    }

    /// The next update; waits for one. Cancel safe: dropping the future loses nothing, so it can
    /// stand in a `select!`.
    ///
    /// # Errors
    /// Only what trying again would not mend, such as a crossing that is not declared.
    pub async fn next(&mut self) -> Result<Update, CallError> {
        self.feed.next().await
    }

    /// Keeps the newest setting of each selected crossing in a folder, and begins with what is there:
    /// verified anew, and [stale](Freshness::Stale) or [expired](Freshness::Expired) until there is contact.
    /// A selection of all crossings begins with nothing.
    #[must_use]
    pub fn keep_in(mut self, folder: &Path) -> Self {
        self.feed.keep_in(folder);
        self
    }

    /// Whether a setting can still be relied on.
    pub fn freshness(&self, setting: &Setting) -> Freshness {
        self.feed.freshness(setting)
    }

    /// House time now, ns, carried on from the newest message by this machine's monotonic clock;
    /// `None` before the first.
    pub fn house_now_ns(&self) -> Option<i64> {
        self.feed.house_now_ns()
    }
}
