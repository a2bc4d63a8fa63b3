"""With a real Prometheus over the sample facility: every panel of the dashboard has data, every metric
that an alert reads is there, and a symptom of a lost reference is held back.

    .ci/prometheus.py    starts the sample, a Prometheus and an Alertmanager, on loopback
"""

import json
import pathlib
import re
import signal
import subprocess
import sys
import tempfile
import time
import urllib.parse
import urllib.request

PROMETHEUS = "http://127.0.0.1:7490"
ALERTMANAGER = "http://127.0.0.1:7491"
DEPLOY = pathlib.Path("deploy")
# House time runs so much faster, so that followers, states and settings have something to tell.
PACE = 20
# Labels of what the sample never does are still read by alerts.
PATIENCE_S = 240


def ask(base, path, **query):
    url = f"{base}{path}?{urllib.parse.urlencode(query)}"
    with urllib.request.urlopen(url, timeout=10) as answer:
        return json.load(answer)


def found(expression):
    return ask(PROMETHEUS, "/api/v1/query", query=expression)["data"]["result"]


def panels():
    board = json.loads((DEPLOY / "dashboard.json").read_text())
    for panel in board["panels"]:
        for target in panel.get("targets", []):
            yield panel["title"], target["expr"].replace("$instance", ".*")


def metrics_of_alerts():
    rules = (DEPLOY / "alerts.yml").read_text()
    return sorted(set(re.findall(r"\b(?:ratewright|process)_[a-z_]+\b(?!:)", rules)))


def wait_until(what, holds):
    deadline = time.monotonic() + PATIENCE_S
    while True:
        missing = holds()
        if not missing:
            return
        if time.monotonic() > deadline:
            sys.exit(f"{what}, still without data after {PATIENCE_S} s: {missing}")
        time.sleep(2)


def up(base):
    def tried():
        try:
            urllib.request.urlopen(f"{base}/-/ready", timeout=2)
            return []
        except OSError as fault:
            return [str(fault)]

    wait_until(base, tried)


def held_back():
    """Posts a lost reference with two of its clocks, and one clock of another: who is told of what?"""
    lost = {"severity": "ticket", "instance": "a", "alertname": "RatewrightClockLost"}
    alerts = [
        {"alertname": "RatewrightReferenceLost", "severity": "page", "instance": "a", "reference": "host"},
        lost | {"clock": "desk", "reference": "host"},
        lost | {"clock": "camera", "reference": "host"},
        lost | {"clock": "lone", "reference": "house"},
    ]
    body = json.dumps([{"labels": labels} for labels in alerts]).encode()
    headers = {"Content-Type": "application/json"}
    request = urllib.request.Request(f"{ALERTMANAGER}/api/v2/alerts", body, headers)
    urllib.request.urlopen(request, timeout=10)
    wanted = {"host": "active", "desk": "suppressed", "camera": "suppressed", "lone": "active"}

    def differing():
        told = ask(ALERTMANAGER, "/api/v2/alerts")
        states = {a["labels"].get("clock", a["labels"]["reference"]): a["status"]["state"] for a in told}
        return [] if states == wanted else [states]

    wait_until("states of the posted alerts", differing)
    print("a lost reference holds back its clocks' alerts, and no other")


def main():
    with tempfile.TemporaryDirectory() as folder:
        config = pathlib.Path(folder) / "prometheus.yml"
        example = (DEPLOY / "prometheus.example.yml").read_text()
        rules = (DEPLOY / "alerts.yml").resolve()
        config.write_text(example.replace("alerts.yml", str(rules)).replace("15s", "2s"))
        quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
        children = [
            subprocess.Popen(["target/release/ratewrightd", "sample", "--pace", str(PACE)], **quiet),
            subprocess.Popen(
                ["prometheus", f"--config.file={config}", f"--storage.tsdb.path={folder}/data",
                 "--web.listen-address=127.0.0.1:7490"], **quiet),
            subprocess.Popen(
                ["prometheus-alertmanager", f"--config.file={DEPLOY}/alertmanager.example.yml",
                 f"--storage.path={folder}/alerts", "--web.listen-address=127.0.0.1:7491",
                 "--cluster.listen-address="], **quiet),
        ]
        try:
            up(PROMETHEUS)
            up(ALERTMANAGER)
            held_back()
            wait_until("panels", lambda: [title for title, expr in panels() if not found(expr)])
            print(f"{len(list(panels()))} queries of the dashboard have data")
            wait_until("metrics of alerts", lambda: [m for m in metrics_of_alerts() if not found(m)])
            print(f"{len(metrics_of_alerts())} metrics that alerts read have data")
            groups = ask(PROMETHEUS, "/api/v1/rules")["data"]["groups"]
            broken = [r["name"] for g in groups for r in g["rules"] if r["health"] == "err"]
            if broken:
                sys.exit(f"rules that fail to evaluate: {broken}")
            firing = {a["labels"]["alertname"] for a in ask(PROMETHEUS, "/api/v1/alerts")["data"]["alerts"]}
            if "RatewrightHeartbeat" not in firing:
                sys.exit("the heartbeat does not fire")
            print(f"rules evaluate; pending or firing: {', '.join(sorted(firing))}")
        finally:
            for child in children:
                child.send_signal(signal.SIGTERM)
            for child in children:
                child.wait(timeout=30)


main()
