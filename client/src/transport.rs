//! The only module that knows which gRPC library carries the calls.

use std::error::Error as _;
use std::time::Duration;

use tonic::transport::{Channel, Endpoint};
use tonic::{Code, Status};
use tonic_types::StatusExt as _;

use crate::{CallError, Refusal, RefusalKind, Violation};

/// How long a connection may take to come up.
const CONNECT_TIMEOUT: Duration = Duration::from_secs(5);

/// How long a unary call may take.
pub(crate) const CALL_TIMEOUT: Duration = Duration::from_secs(10);

/// A peer that is silent for this long is asked for a sign of life.
const KEEPALIVE_INTERVAL: Duration = Duration::from_secs(10);

/// And is given up after this long without one.
const KEEPALIVE_TIMEOUT: Duration = Duration::from_secs(5);

/// Half of it is the budget that unread frames shorter than 256 bytes use up; with a small window
/// a follower that pauses would lose its connection.
const CONNECTION_WINDOW_BYTES: u32 = 32 << 20;

/// How the gRPC library begins to say that an answer was plain HTTP.
const NO_GRPC: &str = "grpc-status header missing";

/// Opens a connection and waits until it is up.
pub(crate) async fn connect(address: &str) -> Result<Channel, CallError> {
    let connected = endpoint(address)?.connect().await;
    connected.map_err(|error| unreachable(address, &error))
}

/// A connection that is opened when it is first used.
pub(crate) fn later(address: &str) -> Result<Channel, CallError> {
    Ok(endpoint(address)?.connect_lazy())
}

fn endpoint(address: &str) -> Result<Endpoint, CallError> {
    let endpoint = Endpoint::from_shared(with_scheme(address))
        .map_err(|error| unreachable(address, &error))?;
    Ok(endpoint
        .connect_timeout(CONNECT_TIMEOUT)
        .http2_keep_alive_interval(KEEPALIVE_INTERVAL)
        .keep_alive_timeout(KEEPALIVE_TIMEOUT)
        .keep_alive_while_idle(true)
        .initial_connection_window_size(CONNECTION_WINDOW_BYTES))
}

fn unreachable(address: &str, error: &tonic::transport::Error) -> CallError {
    CallError::Unreachable {
        address: address.to_owned(),
        reason: innermost(error),
    }
}

fn with_scheme(address: &str) -> String {
    if address.contains("://") {
        address.to_owned()
    } else {
        format!("http://{address}")
    }
}

/// What a status means to the caller: contact lost, or a refusal.
pub(crate) fn call_error(address: &str, status: &Status) -> CallError {
    if status.message().starts_with(NO_GRPC) {
        let reason =
            "whoever listens there does not speak gRPC; is it the port for people?".to_owned();
        return CallError::Unreachable {
            address: address.to_owned(),
            reason,
        };
    }
    if is_loss_of_contact(status) {
        let reason = match status.source() {
            Some(source) => innermost(source),
            None => status.message().to_owned(),
        };
        return CallError::Unreachable {
            address: address.to_owned(),
            reason,
        };
    }
    let details = status.get_error_details();
    let violations = details
        .bad_request()
        .map(|bad| bad.field_violations.as_slice());
    let violations = violations
        .unwrap_or_default()
        .iter()
        .map(|violation| Violation {
            field: violation.field.clone(),
            description: violation.description.clone(),
        });
    CallError::Refused(Refusal {
        kind: kind(status.code()),
        message: status.message().to_owned(),
        violations: violations.collect(),
        retry_after: details.retry_info().and_then(|info| info.retry_delay),
    })
}

/// True if a later try may find the daemon well. A status with a source was made here, by the
/// transport: a connection that ages out can surface as `Cancelled` or `Unknown`.
fn is_loss_of_contact(status: &Status) -> bool {
    match status.code() {
        Code::Unavailable | Code::DeadlineExceeded | Code::ResourceExhausted => true,
        Code::Cancelled | Code::Unknown | Code::Internal => status.source().is_some(),
        _ => false,
    }
}

fn kind(code: Code) -> RefusalKind {
    match code {
        Code::InvalidArgument | Code::OutOfRange => RefusalKind::Invalid,
        Code::NotFound => RefusalKind::NotFound,
        Code::AlreadyExists => RefusalKind::AlreadyExists,
        Code::FailedPrecondition => RefusalKind::Precondition,
        Code::Aborted => RefusalKind::Aborted,
        Code::PermissionDenied | Code::Unauthenticated => RefusalKind::Denied,
        _ => RefusalKind::Other,
    }
}

/// The text at the bottom of an error's chain: "connection refused" rather than "transport error".
fn innermost(error: &dyn std::error::Error) -> String {
    let mut error = error;
    while let Some(source) = error.source() {
        error = source;
    }
    error.to_string()
}

#[cfg(test)]
mod tests {
    use super::*;
    use tonic_types::ErrorDetails;

    #[test]
    fn field_violations_are_decoded() {
        let details = ErrorDetails::with_bad_request_violation("crossing.max_l", "0: 1 to 2^31");
        let status = Status::with_error_details(Code::InvalidArgument, "bad crossing", details);
        let error = call_error("here", &status);
        assert!(error.is(RefusalKind::Invalid));
        assert_eq!(
            error.to_string(),
            "bad crossing; crossing.max_l: 0: 1 to 2^31"
        );
    }

    #[test]
    fn a_cancel_is_a_loss_of_contact_only_if_the_transport_made_it() {
        let from_server = Status::cancelled("stop");
        assert!(matches!(
            call_error("here", &from_server),
            CallError::Refused(_)
        ));
        let broken = std::io::Error::other("connection reset");
        let from_transport = Status::from_error(Box::new(broken));
        assert_eq!(from_transport.code(), Code::Unknown);
        assert!(matches!(
            call_error("here", &from_transport),
            CallError::Unreachable { .. }
        ));
    }
}
