//! The operator's hand.

use ratewright_proto::v1;

use super::{Client, PAGE, timed};
use crate::wire::{clock_name, crossing_name};
use crate::{Act, CallError, Crossing, Id};

impl Client {
    /// Pins a crossing: what it runs stays until it is released, whatever is measured. `by` tells
    /// who does it, 1 to 128 bytes; `note` why, at most 512 bytes.
    ///
    /// # Errors
    /// [`RefusalKind::NotFound`](crate::RefusalKind::NotFound) if it was never declared;
    /// [`RefusalKind::Precondition`](crate::RefusalKind::Precondition) if it cannot be pinned as it
    /// stands; [`RefusalKind::Invalid`](crate::RefusalKind::Invalid) names the field at fault.
    pub async fn pin(&self, crossing: &Id, by: &str, note: &str) -> Result<Crossing, CallError> {
        let request = v1::PinCrossingRequest {
            name: crossing_name(crossing),
            by: by.to_owned(),
            note: note.to_owned(),
        };
        let crossing = self
            .answer(self.crossing_stub().pin_crossing(timed(request)))
            .await?;
        Ok(crossing.try_into()?)
    }

    /// Releases a pinned crossing: it is decided again.
    ///
    /// # Errors
    /// As [`Client::pin`].
    pub async fn release(
        &self,
        crossing: &Id,
        by: &str,
        note: &str,
    ) -> Result<Crossing, CallError> {
        let request = v1::ReleaseCrossingRequest {
            name: crossing_name(crossing),
            by: by.to_owned(),
            note: note.to_owned(),
        };
        let crossing = self
            .answer(self.crossing_stub().release_crossing(timed(request)))
            .await?;
        Ok(crossing.try_into()?)
    }

    /// Says that the stream of a crossing comes from this source from now on: the declared one or
    /// the backup.
    ///
    /// # Errors
    /// As [`Client::pin`].
    pub async fn change_over(
        &self,
        crossing: &Id,
        source: &Id,
        by: &str,
        note: &str,
    ) -> Result<Crossing, CallError> {
        let request = v1::ChangeOverRequest {
            name: crossing_name(crossing),
            source_clock: clock_name(source),
            by: by.to_owned(),
            note: note.to_owned(),
        };
        let crossing = self
            .answer(self.crossing_stub().change_over(timed(request)))
            .await?;
        Ok(crossing.try_into()?)
    }

    /// What operators did to a crossing, newest first, at most `most` acts.
    ///
    /// # Errors
    /// [`RefusalKind::NotFound`](crate::RefusalKind::NotFound) if it was never declared.
    pub async fn acts(&self, crossing: &Id, most: usize) -> Result<Vec<Act>, CallError> {
        let (mut acts, mut page_token) = (Vec::new(), String::new());
        loop {
            let left = i32::try_from(most - acts.len()).unwrap_or(i32::MAX);
            let request = v1::ListActsRequest {
                parent: crossing_name(crossing),
                page_size: left.clamp(1, PAGE),
                page_token,
            };
            let page = self
                .answer(self.crossing_stub().list_acts(timed(request)))
                .await?;
            for act in page.acts {
                acts.push(act.try_into()?);
            }
            page_token = page.next_page_token;
            if page_token.is_empty() || acts.len() >= most {
                acts.truncate(most);
                return Ok(acts);
            }
        }
    }
}
