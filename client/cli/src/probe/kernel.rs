//! The kernel's clocks, and whether anybody disciplines them.

/// Whether the kernel's system clock is being steered towards true time.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) enum Discipline {
    /// Someone steers it.
    Steered,
    /// Nobody does: it ticks just as the raw oscillator does.
    Nobody,
    /// The kernel won't tell.
    Unknown(String),
}

/// One look at both clocks, ns.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Look {
    /// The raw oscillator, which nobody steers.
    pub(crate) raw_ns: i64,
    /// The system clock: steered in rate, never stepped.
    pub(crate) system_ns: i64,
}

#[cfg(target_os = "linux")]
mod linux {
    use rustix::time::{ClockId, Timespec, clock_gettime};

    use super::{Discipline, Look};

    /// Looks in a row, of which the quickest counts: the others were interrupted.
    const LOOKS: usize = 16;

    /// The kernel's tick when nobody changed it, µs (at 100 ticks a second, which is what the
    /// kernel reports whatever its own tick).
    const NOMINAL_TICK_US: libc::c_long = 10_000;

    fn ns(time: Timespec) -> i64 {
        time.tv_sec * 1_000_000_000 + time.tv_nsec
    }

    /// CLOCK_MONOTONIC: steered as CLOCK_REALTIME is, but without its steps.
    pub(crate) fn system_ns() -> i64 {
        ns(clock_gettime(ClockId::Monotonic))
    }

    /// CLOCK_REALTIME minus CLOCK_MONOTONIC, ns.
    pub(crate) fn system_epoch_ns() -> i64 {
        ns(clock_gettime(ClockId::Realtime)) - system_ns()
    }

    /// The raw oscillator first, then the system clock at once, as counter readings want it.
    pub(crate) fn look() -> Look {
        let looks = (0..LOOKS).map(|_| {
            let raw_ns = ns(clock_gettime(ClockId::MonotonicRaw));
            let system_ns = system_ns();
            let after_ns = ns(clock_gettime(ClockId::MonotonicRaw));
            (after_ns - raw_ns, Look { raw_ns, system_ns })
        });
        let quickest = looks.min_by_key(|(took_ns, _)| *took_ns);
        quickest.expect("there is at least one look").1
    }

    /// Asks the kernel for the state of its clock discipline.
    #[allow(
        unsafe_code,
        reason = "no safe crate offers adjtimex; it only writes the struct it is given, and a \
                  zeroed one asks for a reading"
    )]
    pub(crate) fn discipline() -> Discipline {
        // SAFETY: timex is plain integers, for which zero is a value.
        let mut state: libc::timex = unsafe { std::mem::zeroed() };
        // SAFETY: the pointer is to a timex that outlives the call.
        if unsafe { libc::adjtimex(&raw mut state) } < 0 {
            return Discipline::Unknown(std::io::Error::last_os_error().to_string());
        }
        let unsynchronised = state.status & libc::STA_UNSYNC != 0;
        if unsynchronised && state.freq == 0 && state.tick == NOMINAL_TICK_US {
            Discipline::Nobody
        } else {
            Discipline::Steered
        }
    }
}

#[cfg(target_os = "linux")]
pub(crate) use linux::{discipline, look, system_epoch_ns, system_ns};

#[cfg(all(test, target_os = "linux"))]
mod tests {
    use super::*;

    #[test]
    fn looks_are_in_order_and_close() {
        let before_ns = system_ns();
        let look = look();
        let after_ns = system_ns();
        assert!(before_ns <= look.system_ns && look.system_ns <= after_ns);
        assert!(look.raw_ns > 0);
    }

    #[test]
    fn an_unsteered_clock_ticks_as_the_raw_one_does() {
        // Whatever this machine is, its verdict and its clocks must agree.
        if discipline() != Discipline::Nobody {
            return;
        }
        let start = look();
        std::thread::sleep(std::time::Duration::from_millis(300));
        let end = look();
        let (raw, system) = (end.raw_ns - start.raw_ns, end.system_ns - start.system_ns);
        // The two are read 20 to 100 ns apart; 1 µs in 300 ms is 3 ppm, far below a crystal's worth.
        assert!(
            (raw - system).abs() < 1_000,
            "raw {raw} ns, system {system} ns"
        );
    }
}
