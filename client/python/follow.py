"""Follows a crossing with grpcio and nothing of ratewright's own.

    pip install -r requirements.txt
    python follow.py 127.0.0.1:7420 film

`film` is a crossing of the sample facility; a wrong name is answered with those that there are. Each setting
is printed as it comes. A player runs it from the first block end at or after its effect instant, and says so
with that block end's house time: `--says-applied` does, although nothing is run here. The daemon believes it,
so use it only for a crossing that nobody else runs. A player would also report the level of its buffer
(Occupancy), as measured. Certificates are not verified here; the Rust library does that.
"""

import argparse
import queue
import sys
import tempfile
import threading
import time
from pathlib import Path

import grpc
from grpc_tools import protoc

PROTO = Path(__file__).resolve().parents[2] / "proto"
# Longer silence than this, in seconds, is a loss of contact: a daemon that hangs closes no connection.
SILENCE_S = 5


def generate():
    """Makes the code of the contract in a scratch folder. A program of yours does it once, when it is built."""
    out = tempfile.mkdtemp()
    well_known = Path(protoc.__file__).parent / "_proto"
    files = [str(path.relative_to(PROTO)) for path in PROTO.glob("ratewright/v1/*.proto")]
    arguments = [f"-I{PROTO}", f"-I{well_known}", f"--python_out={out}", f"--grpc_python_out={out}"]
    if protoc.main(["protoc", *arguments, *files]) != 0:
        sys.exit("the contract does not compile")
    sys.path.insert(0, out)


generate()
from ratewright.v1 import crossing_pb2, crossing_pb2_grpc  # noqa: E402
from ratewright.v1 import ratio_pb2, ratio_pb2_grpc, reading_pb2, reading_pb2_grpc  # noqa: E402


def ahead_ns(readings):
    """This machine's monotonic clock minus house time, ns, by the quickest of a few exchanges."""

    def exchange():
        request = reading_pb2.ExchangeTimeRequest(t1_ns=time.monotonic_ns())
        answer = readings.ExchangeTime(request, timeout=SILENCE_S)
        t4_ns = time.monotonic_ns()
        there, back = answer.t1_ns - answer.t2_ns, t4_ns - answer.t3_ns
        return (t4_ns - answer.t1_ns) - (answer.t3_ns - answer.t2_ns), (there + back) // 2

    return min(exchange() for _ in range(4))[1]


def until_silent(readings, call):
    """Ends a call when the daemon no longer answers."""
    while call.is_active():
        time.sleep(SILENCE_S)
        try:
            ahead_ns(readings)
        except grpc.RpcError:
            call.cancel()


def running(setting):
    kind = setting.WhichOneof("realisation")
    what = getattr(setting, kind)
    if kind == "single":
        return f"{what.l}/{what.m}"
    if kind == "stepping":
        return f"{what.advance} or {what.longer_advance} of {what.phases} phases for each output"
    pair = what.cadence if kind == "lazy" else what
    return f"{pair.low.l}/{pair.low.m} and {pair.high.l}/{pair.high.m} in turn ({kind})"


def follow(channel, wishes, known):
    """Follows until the stream ends; `known` are the names of the settings heard, the newest last."""
    ratios = ratio_pb2_grpc.RatioServiceStub(channel)
    readings = reading_pb2_grpc.ReadingServiceStub(channel)
    said = queue.Queue()
    select = ratio_pb2.WatchSettingsRequest(
        crossings=[f"crossings/{wishes.crossing}"], newest_known=known[-1:]
    )
    said.put(ratio_pb2.FollowSettingsRequest(select=select))
    call = ratios.FollowSettings(iter(said.get, None))
    threading.Thread(target=until_silent, args=(readings, call), daemon=True).start()
    for answer in call:
        kind = answer.WhichOneof("message")
        if kind == "refused":
            refused = answer.refused
            print(f"refused: {refused.field} is {refused.value}: accepted is {refused.accepted}")
        if kind != "setting":
            continue
        setting = answer.setting
        reason = ratio_pb2.SettingReason.Name(setting.reason).removeprefix("SETTING_REASON_").lower()
        print(f"{setting.name}: {running(setting)}, from house time {setting.effect_ns} ns ({reason})", flush=True)
        known.append(setting.name)
        if wishes.says_applied:
            ahead = ahead_ns(readings)
            time.sleep(max(setting.effect_ns + ahead - time.monotonic_ns(), 0) / 1e9)
            applied = ratio_pb2.Applied(setting=setting.name, house_ns=time.monotonic_ns() - ahead)
            said.put(ratio_pb2.FollowSettingsRequest(applied=applied))
        if len(known) == wishes.settings:
            # Half-closed: what was said is still taken in, and the stream goes on until it is cancelled.
            said.put(None)
            time.sleep(0.5)
            call.cancel()
            return


def crossings(channel):
    listed = crossing_pb2_grpc.CrossingServiceStub(channel).ListCrossings(
        crossing_pb2.ListCrossingsRequest(page_size=1000)
    )
    return ", ".join(crossing.name.removeprefix("crossings/") for crossing in listed.crossings)


def main():
    parser = argparse.ArgumentParser(description="Follows a crossing.")
    parser.add_argument("server", metavar="HOST:PORT")
    parser.add_argument("crossing")
    parser.add_argument("settings", nargs="?", type=int, help="stop after so many")
    parser.add_argument("--says-applied", action="store_true", help="tell the daemon that each was applied")
    wishes = parser.parse_args()
    known = []
    while True:
        with grpc.insecure_channel(wishes.server) as channel:
            try:
                return follow(channel, wishes, known)
            except grpc.RpcError as lost:
                if lost.code() == grpc.StatusCode.NOT_FOUND:
                    sys.exit(f"{lost.details()}; there are: {crossings(channel)}")
                if lost.code() not in (
                    grpc.StatusCode.UNAVAILABLE,
                    grpc.StatusCode.CANCELLED,
                    grpc.StatusCode.DEADLINE_EXCEEDED,
                ):
                    sys.exit(f"{lost.code().name}: {lost.details()}")
        # A player goes on with what it runs, and comes back.
        print("no contact; once more in a second", flush=True)
        time.sleep(1)


main()
