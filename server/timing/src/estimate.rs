//! What is known of a clock at an instant.

use serde::{Deserialize, Serialize};

use crate::forecast::Forecast;
use crate::normal::Z95;

/// State of an estimate (terms of ITU-T G.810; here they speak of the estimate, not of the
/// oscillator), from worst to best in the order of [`State::worse`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub enum State {
    /// Never measured, or the interval is wider than 10 ppm: only the prior speaks.
    FreeRunning,
    /// Measured, and the interval is still wider than wanted.
    Acquiring,
    /// The interval is as narrow as wanted.
    Locked,
    /// Measurements have stopped; the interval grows.
    Holdover,
}

impl State {
    fn rank(self) -> u8 {
        match self {
            State::FreeRunning => 0,
            State::Holdover => 1,
            State::Acquiring => 2,
            State::Locked => 3,
        }
    }

    /// The worse of two states: free-running, then holdover, acquiring, locked.
    pub fn worse(self, other: State) -> State {
        if self.rank() <= other.rank() {
            self
        } else {
            other
        }
    }
}

/// Drift and phase of a clock against its reference at one instant, with their uncertainty.
///
/// Drift `y` means: the clock's true rate is nominal·(1 + y) in time of the reference.
/// `low..=high` holds the truth 95 times in 100.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// State of the estimate.
    pub state: State,
    /// Why it is in that state.
    pub reason: Reason,
    /// Drift, dimensionless; positive runs fast.
    pub drift: f64,
    /// Standard deviation of the drift, dimensionless.
    pub deviation: f64,
    /// Lower end of the 95 % interval of the drift.
    pub low: f64,
    /// Upper end of the 95 % interval of the drift.
    pub high: f64,
    /// Rate at which the drift changes now, 1/s.
    pub drift_rate_per_s: f64,
    /// Clock time minus reference time since the first reading, ns. Steps and resets of the
    /// counter are taken out: it is the integral of the drift.
    pub phase_ns: f64,
    /// Standard deviation of `phase_ns`, ns.
    pub phase_deviation_ns: f64,
    /// Covariance of `phase_ns` and `drift`, ns.
    pub phase_drift_covariance_ns: f64,
    /// The same phase at the time of the first reading, ns, as all of the first readings show
    /// it, 256 of them (blocks of four count as one) or as many as there are: the single first
    /// reading is off by its own error. `phase_ns` − `first_phase_ns` is what the clock has
    /// gained on the reference since then. A constant latency is in both, and
    /// cancels.
    pub first_phase_ns: f64,
    /// Standard deviation of `first_phase_ns`, ns. Its error and that of `phase_ns` are as good
    /// as independent once the link has run for several times its first readings.
    pub first_phase_deviation_ns: f64,
    /// Reference time the estimate speaks of, ns.
    pub as_of_ns: i64,
    /// Reference time of the last reading taken; absent when there was none.
    pub last_reading_ns: Option<i64>,
    /// Readings that went into the estimate, outliers left out.
    pub rows_used: u64,
    /// Readings set aside as outliers.
    pub outliers: u64,
    /// When the estimate should lock if readings go on as they do, seconds from now; absent
    /// when it is locked, when nothing comes in, or when it is not foreseeable.
    pub lock_expected_in_s: Option<f64>,
    /// How the uncertainty grows from here.
    pub forecast: Forecast,
}

/// Why an estimate is in its state.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Reason {
    /// Nothing was measured yet.
    NeverMeasured,
    /// The 95 % interval is still wider than 10 ppm on either side.
    TooWide,
    /// The interval is narrowing, but too few readings or too wide for a lock.
    Narrowing,
    /// The interval is within the lock threshold and was for eight readings.
    WithinThreshold,
    /// It was locked, and the interval has grown past one and a half times the threshold.
    LockLost,
    /// No reading for longer than the usual interval allows.
    ReadingsStopped,
    /// The clock is the reference by definition.
    ByDefinition,
}

impl Estimate {
    /// Half-width of the 95 % interval, dimensionless.
    pub fn half_width(&self) -> f64 {
        (self.high - self.low) / 2.0
    }

    /// Standard deviation of the drift `horizon_s` from now if nothing more is measured.
    pub fn drift_deviation_after(&self, horizon_s: f64) -> f64 {
        self.forecast.drift_variance(horizon_s.max(0.0)).sqrt()
    }

    /// Standard deviation of the phase that the clock gains on its reference over the next
    /// `tau_s` seconds, beyond `drift·tau`: seconds.
    ///
    /// The full covariance counts: uncertain drift, its change, wander and temperature.
    pub fn phase_growth_deviation_s(&self, tau_s: f64) -> f64 {
        self.forecast.phase_variance_s2(tau_s.max(0.0)).sqrt()
    }

    /// Variance of the phase gained over `tau_s`, s²: the square of
    /// [`Estimate::phase_growth_deviation_s`].
    pub fn predict_variance(&self, tau_s: f64) -> f64 {
        self.forecast.phase_variance_s2(tau_s.max(0.0))
    }
}

/// The estimate of a clock that is the reference by definition: drift 0, deviation 0, locked.
///
/// ```
/// let e = ratewright_timing::exact(5);
/// assert_eq!((e.drift, e.deviation, e.as_of_ns), (0.0, 0.0, 5));
/// ```
pub fn exact(at_reference_ns: i64) -> Estimate {
    Estimate {
        state: State::Locked,
        reason: Reason::ByDefinition,
        drift: 0.0,
        deviation: 0.0,
        low: 0.0,
        high: 0.0,
        drift_rate_per_s: 0.0,
        phase_ns: 0.0,
        phase_deviation_ns: 0.0,
        phase_drift_covariance_ns: 0.0,
        first_phase_ns: 0.0,
        first_phase_deviation_ns: 0.0,
        as_of_ns: at_reference_ns,
        last_reading_ns: None,
        rows_used: 0,
        outliers: 0,
        lock_expected_in_s: None,
        forecast: Forecast::exact(),
    }
}

/// A device against the house, from the device against a host and the host against the house.
///
/// With y the drifts, (1 + y) = (1 + y_device_host)(1 + y_host_house): a device that gains on
/// a host that gains on the house gains both. Variances add, the state is the worse of the two.
/// Times (`as_of_ns`, `last_reading_ns`) are the house's, so those of `host_vs_house`.
///
/// ```
/// use ratewright_timing::{compose, exact};
/// let mut device = exact(0);
/// let mut host = exact(0);
/// (device.drift, device.low, device.high) = (3e-6, 3e-6, 3e-6);
/// (host.drift, host.low, host.high) = (-1e-6, -2e-6, 0.0);
/// let both = compose(&device, &host);
/// assert!(((1.0 + both.drift) - (1.0 + 3e-6) * (1.0 - 1e-6)).abs() < 1e-15);
/// assert!((both.high - both.drift - 1e-6).abs() < 1e-11);
/// ```
pub fn compose(device_vs_host: &Estimate, host_vs_house: &Estimate) -> Estimate {
    let (a, b) = (device_vs_host, host_vs_house);
    let drift = a.drift + b.drift + a.drift * b.drift;
    let (gain_a, gain_b) = (1.0 + b.drift, 1.0 + a.drift);
    let quadrature = |va: f64, vb: f64| libm::hypot(gain_a * va, gain_b * vb);
    let half_width = quadrature(a.half_width(), b.half_width());
    let state = a.state.worse(b.state);
    let lock_expected_in_s = match (a.state, b.state) {
        (State::Locked, State::Locked) => None,
        (State::Locked, _) => b.lock_expected_in_s,
        (_, State::Locked) => a.lock_expected_in_s,
        _ => a
            .lock_expected_in_s
            .zip(b.lock_expected_in_s)
            .map(|(x, y)| x.max(y)),
    };
    Estimate {
        state,
        reason: if state == a.state { a.reason } else { b.reason },
        drift,
        deviation: quadrature(a.deviation, b.deviation),
        low: drift - half_width,
        high: drift + half_width,
        drift_rate_per_s: gain_a * a.drift_rate_per_s + gain_b * b.drift_rate_per_s,
        phase_ns: a.phase_ns + b.phase_ns,
        phase_deviation_ns: libm::hypot(a.phase_deviation_ns, b.phase_deviation_ns),
        phase_drift_covariance_ns: a.phase_drift_covariance_ns + b.phase_drift_covariance_ns,
        first_phase_ns: a.first_phase_ns + b.first_phase_ns,
        first_phase_deviation_ns: libm::hypot(
            a.first_phase_deviation_ns,
            b.first_phase_deviation_ns,
        ),
        as_of_ns: b.as_of_ns,
        last_reading_ns: b.last_reading_ns,
        rows_used: a.rows_used + b.rows_used,
        outliers: a.outliers + b.outliers,
        lock_expected_in_s,
        forecast: a.forecast.plus(&b.forecast),
    }
}

/// Half-width of a 95 % interval of a normal variable with the given deviation.
pub(crate) fn normal_half_width(deviation: f64) -> f64 {
    Z95 * deviation
}
