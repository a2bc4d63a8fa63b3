//! Counting instructions exactly, where there are no counters to ask: the work is done by a
//! child of this process, which is stepped through it one instruction at a time.
#![allow(
    unsafe_code,
    reason = "fork and ptrace are calls of the operating system"
)]

/// Instructions that `work` takes in user mode. The work is done in a copy of this process, so
/// that here nothing changes. `None` where that cannot be done.
#[cfg(target_os = "linux")]
pub(crate) fn count(work: impl FnOnce()) -> Option<u64> {
    stay_on_one_core();
    // SAFETY: this process has one thread, so the child may do what it did.
    match unsafe { libc::fork() } {
        ..0 => None,
        0 => run_traced(work),
        child => {
            let steps = step_through(child);
            // SAFETY: the child is ours; it is stopped, or gone.
            unsafe { libc::kill(child, libc::SIGKILL) };
            wait(child);
            steps
        }
    }
}

/// Elsewhere nothing is counted.
#[cfg(not(target_os = "linux"))]
pub(crate) fn count(_work: impl FnOnce()) -> Option<u64> {
    None
}

/// Parent and child take turns: on one core that is several times faster.
#[cfg(target_os = "linux")]
fn stay_on_one_core() {
    // SAFETY: an all-zero set is a set of no cores, and is filled in before it is used. If the
    // call fails all goes on, only slower.
    unsafe {
        let mut cores: libc::cpu_set_t = std::mem::zeroed();
        libc::CPU_SET(libc::sched_getcpu().max(0) as usize, &mut cores);
        libc::sched_setaffinity(0, size_of::<libc::cpu_set_t>(), &raw const cores);
    }
}

/// The child: stops before the work and after it.
#[cfg(target_os = "linux")]
fn run_traced(work: impl FnOnce()) -> ! {
    // SAFETY: calls with plain values; the child leaves without running any destructor.
    unsafe {
        libc::ptrace(libc::PTRACE_TRACEME, 0, 0, 0);
        libc::raise(libc::SIGSTOP);
        work();
        libc::raise(libc::SIGSTOP);
        libc::_exit(0)
    }
}

/// Status of the child once it has stopped or gone.
#[cfg(target_os = "linux")]
fn wait(child: libc::pid_t) -> i32 {
    let mut status = 0;
    // SAFETY: the status is written where it lives.
    unsafe { libc::waitpid(child, &raw mut status, 0) };
    status
}

#[cfg(target_os = "linux")]
fn step_through(child: libc::pid_t) -> Option<u64> {
    wait(child);
    let mut steps = 0;
    loop {
        // SAFETY: the child is traced and stopped.
        if unsafe { libc::ptrace(libc::PTRACE_SINGLESTEP, child, 0, 0) } != 0 {
            return None;
        }
        let status = wait(child);
        if !libc::WIFSTOPPED(status) {
            return None;
        }
        match libc::WSTOPSIG(status) {
            libc::SIGTRAP => steps += 1,
            _ => return Some(steps),
        }
    }
}
