"""Follows a crossing and reports what a follower reports, with grpcio and nothing of ratewright's own.

    pip install -r requirements.txt
    python follow.py 127.0.0.1:7420 stage-to-truck

Each setting is printed as it comes. A real player runs it from the first block end at or after its effect
instant, and says so; this one only waits for the instant. The mapping of house time to its own clock comes
from the stream itself: each message carries the house time of its sending, so it is late by the way here.
A player needs better: the two-way exchange of ReadingService. Certificates are not verified here; the Rust
library does that.
"""

import queue
import sys
import tempfile
import time
from pathlib import Path

import grpc
from grpc_tools import protoc

PROTO = Path(__file__).resolve().parents[2] / "proto"
MESSAGES = sys.argv[3:4]  # stop after so many settings; none: go on


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
from ratewright.v1 import ratio_pb2, ratio_pb2_grpc  # noqa: E402


def running(setting):
    kind = setting.WhichOneof("realisation")
    what = getattr(setting, kind)
    if kind == "single":
        return f"{what.l}/{what.m}"
    if kind == "stepping":
        return f"{what.advance} or {what.longer_advance} of {what.phases} phases for each output"
    pair = what.cadence if kind == "lazy" else what
    return f"{pair.low.l}/{pair.low.m} and {pair.high.l}/{pair.high.m} in turn ({kind})"


def follow(stub, crossing, most):
    said = queue.Queue()
    select = ratio_pb2.WatchSettingsRequest(crossings=[f"crossings/{crossing}"])
    said.put(ratio_pb2.FollowSettingsRequest(select=select))
    heard = 0
    for answer in stub.FollowSettings(iter(said.get, None)):
        if answer.WhichOneof("message") == "refused":
            refused = answer.refused
            print(f"refused: {refused.field} is {refused.value}: accepted is {refused.accepted}")
            continue
        setting = answer.setting
        print(f"{setting.name}: {running(setting)}, from house time {setting.effect_ns} ns", flush=True)
        wait_ns = setting.effect_ns - answer.house_ns
        time.sleep(max(wait_ns, 0) / 1e9)
        house_ns = answer.house_ns + max(wait_ns, 0)
        said.put(
            ratio_pb2.FollowSettingsRequest(
                applied=ratio_pb2.Applied(setting=setting.name, house_ns=house_ns)
            )
        )
        said.put(
            ratio_pb2.FollowSettingsRequest(
                occupancy=ratio_pb2.Occupancy(
                    crossing=setting.crossing,
                    level_samples=0.0,
                    deviation_samples=1.0,
                    house_ns=house_ns,
                )
            )
        )
        heard += 1
        if heard == most:
            # Half-closed: what was said is still taken in before the stream ends.
            said.put(None)
            time.sleep(0.5)
            return


def main():
    if len(sys.argv) < 3:
        sys.exit("usage: follow.py HOST:PORT CROSSING [SETTINGS]")
    most = int(MESSAGES[0]) if MESSAGES else None
    while True:
        try:
            with grpc.insecure_channel(sys.argv[1]) as channel:
                follow(ratio_pb2_grpc.RatioServiceStub(channel), sys.argv[2], most)
            return
        except grpc.RpcError as lost:
            if lost.code() != grpc.StatusCode.UNAVAILABLE:
                sys.exit(f"{lost.code().name}: {lost.details()}")
            # A player goes on with what it runs, and comes back.
            print("no contact; once more in a second", flush=True)
            time.sleep(1)


main()
