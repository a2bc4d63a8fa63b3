"""Runs the README's main job as a user would, and holds it to what the README says of it.

Usage: sample.py COMMAND

Within 60 s of the daemon's start every clock that is measured must be past free-running and
every crossing must have a setting; the summary must have been printed, and the page must say of each
clock what the command line says. Then the daemon is killed without warning and started again on
the same store: no number may be lost or used twice, and settings must be served within a second
of the process's start. At last it must end by itself when told to.
"""

import atexit
import json
import os
import re
import shlex
import signal
import subprocess
import sys
import tempfile
import time
import urllib.request

CLI = "target/release/ratewright"
PAGE = "http://127.0.0.1:7421/"


def standing():
    """What the daemon says of its clocks and crossings; None while it does not serve."""
    run = subprocess.run([CLI, "standing", "--json"], capture_output=True, text=True, check=False)
    return json.loads(run.stdout) if run.returncode == 0 else None


def until(deadline, what, ask):
    """Asks again and again until the answer is good; fails at the deadline."""
    while True:
        answer = ask()
        if answer:
            return answer
        if time.monotonic() > deadline:
            sys.exit(f"not in time: {what}")
        time.sleep(0.1)


def settled():
    now = standing()
    if not now or not now["crossings"]:
        return None
    clocks = [clock for clock in now["clocks"] if not clock["exact"]]
    measured = all(clock["estimate"]["state"] != "free-running" for clock in clocks)
    return now if measured and all(c["setting"] for c in now["crossings"]) else None


def numbers(now):
    """(epoch, number) of the newest setting of each crossing."""
    return {
        c["crossing"]: (c["setting"]["epoch"], c["setting"]["number"])
        for c in now["crossings"]
        if c["setting"]
    }


def daemon(command, store, printed):
    """Starts the daemon in a group of its own, which does not outlive this script. Its binary is
    built, so cargo adds little."""
    process = subprocess.Popen(
        [*shlex.split(command), "--store", store],
        stdout=printed,
        stderr=subprocess.STDOUT,
        start_new_session=True,
    )
    atexit.register(end, process)
    return process


def end(process):
    if process.poll() is None:
        os.killpg(process.pid, signal.SIGKILL)


def main():
    with tempfile.TemporaryDirectory() as store, tempfile.TemporaryFile("w+") as printed:
        if standing():
            sys.exit("another daemon serves on the default ports")
        began = time.monotonic()
        first = daemon(sys.argv[1], store, printed)
        until(began + 60, "the sample facility measured, with a setting everywhere", settled)
        print(f"sample: every clock measured, every crossing set after {time.monotonic() - began:.1f} s")

        def summary():
            printed.seek(0)
            text = printed.read()
            return text if "crossings have a setting" in text else None

        print(until(began + 60, "the printed summary", summary))
        same_on_page()

        before = numbers(standing())
        os.killpg(first.pid, signal.SIGKILL)
        first.wait()

        # The binary itself, so that cargo's own start does not count.
        began = time.monotonic()
        second = daemon("target/release/ratewrightd sample", store, printed)
        after = numbers(until(began + 1, "settings within 1 s of the restart", settled_or_set))
        print(f"sample: settings served {time.monotonic() - began:.2f} s after the restart")
        for crossing, number in before.items():
            if after[crossing] < number:
                sys.exit(f"{crossing} went back from {number} to {after[crossing]}")
        history(before)
        os.killpg(second.pid, signal.SIGTERM)
        if second.wait(timeout=30) != 0:
            sys.exit(f"the daemon ended with {second.returncode}")
    print("sample: ended by itself when told to")


def same_on_page():
    """The page says of each clock which state it is in, and when those not locked will be."""

    def differing():
        with urllib.request.urlopen(PAGE + "clocks", timeout=5) as page:
            html = page.read().decode()
        # A row begins with the clock's id.
        rows = {row.split('"', 1)[0]: re.sub(r"<[^>]+>", " ", row) for row in html.split('id="clock-')[1:]}
        for clock in standing()["clocks"]:
            row = rows.get(clock["clock"])
            if row is None:
                return f"the page does not show {clock['clock']}"
            if clock["estimate"]["state"] not in row:
                return f"the page does not say {clock['estimate']['state']}: {row}"
            if clock["estimate"]["state"] == "acquiring" and not re.search("in about|cannot", row):
                return f"the page does not say when it will be locked: {row}"
        return None

    # A clock may change its state between the two looks.
    fault = None
    for _ in range(3):
        fault = differing()
        if fault is None:
            return
    sys.exit(fault)


def settled_or_set():
    now = standing()
    return now if now and now["crossings"] and all(c["setting"] for c in now["crossings"]) else None


def history(before):
    """Each setting that was served before the kill is still there under its number."""
    for crossing, (epoch, number) in before.items():
        for n in range(1, number + 1):
            name = f"crossings/{crossing}/settings/{epoch}-{n}"
            run = subprocess.run([CLI, "explain", name], capture_output=True, check=False)
            if run.returncode != 0:
                sys.exit(f"{name} was lost: {run.stderr.decode()}")
    print(f"sample: {sum(n for _, n in before.values())} settings, none lost")


main()
