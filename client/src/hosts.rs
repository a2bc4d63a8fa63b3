//! The daemons that a client may talk to, of which one is in use at a time.

use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use tonic::Status;
use tonic::transport::Channel;

use crate::{CallError, transport};

/// One address and the connection to it, which is made when it is first used.
#[derive(Debug)]
struct Host {
    address: Arc<str>,
    channel: Channel,
}

/// Several addresses of one service.
#[derive(Debug)]
pub(crate) struct Hosts {
    hosts: Vec<Host>,
    current: AtomicUsize,
}

/// A place in [`Hosts`]: whoever loses contact says over which it was.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Place(usize);

impl Hosts {
    /// Connects to the first that answers, beginning at a random one, so that the clients of a
    /// facility spread over its daemons.
    pub(crate) async fn connect(addresses: &[&str]) -> Result<Self, CallError> {
        let first = fastrand::usize(..addresses.len().max(1));
        let mut last_error = CallError::Unreachable {
            address: String::new(),
            reason: "no address was given".to_owned(),
        };
        for turn in 0..addresses.len() {
            let index = (first + turn) % addresses.len();
            match transport::connect(addresses[index]).await {
                Ok(channel) => return Self::with(addresses, index, channel),
                Err(error) => last_error = error,
            }
        }
        Err(last_error)
    }

    fn with(addresses: &[&str], current: usize, channel: Channel) -> Result<Self, CallError> {
        let mut hosts = Vec::with_capacity(addresses.len());
        for (index, address) in addresses.iter().enumerate() {
            let channel = if index == current {
                channel.clone()
            } else {
                transport::later(address)?
            };
            let address = (*address).into();
            hosts.push(Host { address, channel });
        }
        Ok(Self {
            hosts,
            current: AtomicUsize::new(current),
        })
    }

    /// As [`Hosts::connect`], without waiting for any of them.
    pub(crate) fn later(addresses: &[&str]) -> Result<Self, CallError> {
        let Some(first) = addresses.first() else {
            return Err(CallError::Unreachable {
                address: String::new(),
                reason: "no address was given".to_owned(),
            });
        };
        let channel = transport::later(first)?;
        Self::with(addresses, 0, channel)
    }

    /// The place in use.
    pub(crate) fn place(&self) -> Place {
        Place(self.current.load(Ordering::Relaxed))
    }

    pub(crate) fn address(&self, place: Place) -> &str {
        &self.hosts[place.0].address
    }

    pub(crate) fn channel(&self, place: Place) -> Channel {
        self.hosts[place.0].channel.clone()
    }

    /// Contact was lost over `place`: goes on to the next address, unless another call has done
    /// so already.
    pub(crate) fn leave(&self, place: Place) {
        let next = (place.0 + 1) % self.hosts.len();
        let _ = self
            .current
            .compare_exchange(place.0, next, Ordering::Relaxed, Ordering::Relaxed);
    }

    /// What a status of a call over `place` means. A loss of contact leaves the place.
    pub(crate) fn error(&self, place: Place, status: &Status) -> CallError {
        let error = transport::call_error(self.address(place), status);
        if matches!(error, CallError::Unreachable { .. }) {
            self.leave(place);
        }
        error
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[tokio::test]
    async fn each_loss_moves_on_once_however_many_calls_saw_it() {
        let hosts = Hosts::later(&["a:1", "b:2", "c:3"]).expect("good addresses");
        let first = hosts.place();
        assert_eq!(hosts.address(first), "a:1");
        hosts.leave(first);
        hosts.leave(first);
        assert_eq!(hosts.address(hosts.place()), "b:2");
        let refused = Status::not_found("no such crossing");
        hosts.error(hosts.place(), &refused);
        assert_eq!(
            hosts.address(hosts.place()),
            "b:2",
            "a refusal is an answer"
        );
        hosts.error(hosts.place(), &Status::unavailable("stopping"));
        hosts.leave(hosts.place());
        assert_eq!(hosts.place(), first, "and around");
        assert!(Hosts::later(&[]).is_err());
    }
}
