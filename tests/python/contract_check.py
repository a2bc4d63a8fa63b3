"""A stranger's client: made from the .proto files alone, with grpcio.

Usage: contract_check.py HOST:PORT

Declares clocks and a crossing, reports readings, watches the settings that follow, and checks
that bad input is refused with a field violation while the stream goes on.
"""

import math
import queue
import sys
import tempfile
import time
import unittest
from pathlib import Path

import grpc
from google.protobuf.field_mask_pb2 import FieldMask
from google.rpc import error_details_pb2
from grpc_health.v1 import health_pb2, health_pb2_grpc
from grpc_reflection.v1alpha.proto_reflection_descriptor_database import (
    ProtoReflectionDescriptorDatabase,
)
from grpc_status import rpc_status
from grpc_tools import protoc

PROTO = Path(__file__).resolve().parents[2] / "proto"
FILES = sorted(str(path.relative_to(PROTO)) for path in PROTO.glob("ratewright/v1/*.proto"))
WELL_KNOWN = Path(protoc.__file__).parent / "_proto"


def generate():
    """Makes the client code in a scratch folder and puts it on the path."""
    out = tempfile.mkdtemp()
    arguments = ["protoc", f"-I{PROTO}", f"-I{WELL_KNOWN}", f"--python_out={out}"]
    if protoc.main([*arguments, f"--grpc_python_out={out}", *FILES]) != 0:
        sys.exit("the contract does not compile with protoc")
    sys.path.insert(0, out)


generate()
# pylint: disable=wrong-import-position
from ratewright.v1 import clock_pb2, clock_pb2_grpc  # noqa: E402
from ratewright.v1 import crossing_pb2, crossing_pb2_grpc  # noqa: E402
from ratewright.v1 import rate_pb2, ratio_pb2, ratio_pb2_grpc  # noqa: E402
from ratewright.v1 import reading_pb2, reading_pb2_grpc  # noqa: E402

ADDRESS = sys.argv.pop(1) if len(sys.argv) > 1 else "127.0.0.1:7420"
PPM = 1e-6


class Conversation:
    """A two-way stream that is fed by hand."""

    def __init__(self, method):
        self.outgoing = queue.Queue()
        self.incoming = method(iter(self.outgoing.get, None), timeout=30)

    def say(self, message):
        self.outgoing.put(message)
        return next(self.incoming)

    def end(self):
        self.outgoing.put(None)
        return list(self.incoming)


def violations(error):
    """The fields that a refusal names."""
    found = []
    for detail in rpc_status.from_call(error).details:
        bad = error_details_pb2.BadRequest()
        if detail.Unpack(bad):
            found += [(v.field, v.description) for v in bad.field_violations]
    return found


class ContractCheck(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.channel = grpc.insecure_channel(ADDRESS)
        grpc.channel_ready_future(cls.channel).result(timeout=20)
        cls.clocks = clock_pb2_grpc.ClockServiceStub(cls.channel)
        cls.crossings = crossing_pb2_grpc.CrossingServiceStub(cls.channel)
        cls.readings = reading_pb2_grpc.ReadingServiceStub(cls.channel)
        cls.ratios = ratio_pb2_grpc.RatioServiceStub(cls.channel)
        cls.tag = f"py{time.time_ns()}"

    def declare(self, name, hertz, **more):
        rate = rate_pb2.Rate(numerator=hertz, denominator=1)
        clock = clock_pb2.Clock(
            name=f"clocks/{self.tag}-{name}", nominal_rate=rate, **more
        )
        return self.clocks.CreateClock(clock_pb2.CreateClockRequest(clock=clock))

    def refused(self, code, call):
        with self.assertRaises(grpc.RpcError) as caught:
            call()
        self.assertEqual(caught.exception.code(), code, caught.exception.details())
        return caught.exception

    def test_health_and_reflection_are_served(self):
        health = health_pb2_grpc.HealthStub(self.channel)
        answer = health.Check(health_pb2.HealthCheckRequest())
        self.assertEqual(answer.status, health_pb2.HealthCheckResponse.SERVING)
        names = ProtoReflectionDescriptorDatabase(self.channel).get_services()
        for service in ("Clock", "Crossing", "Reading", "Ratio"):
            self.assertIn(f"ratewright.v1.{service}Service", names)

    def test_the_loop(self):
        source = self.declare("player", 44100)
        sink = self.declare("desk", 48000, exact=True)
        crossing = self.crossings.CreateCrossing(
            crossing_pb2.CreateCrossingRequest(
                crossing=crossing_pb2.Crossing(
                    name=f"crossings/{self.tag}-in",
                    source_clock=source.name,
                    sink_clock=sink.name,
                    max_l=1024,
                    max_m=1024,
                    headroom_samples=4,
                )
            )
        )
        watch = self.ratios.WatchSettings(
            ratio_pb2.WatchSettingsRequest(crossings=[crossing.name]), timeout=60
        )
        first = next(watch).setting
        self.assertEqual(first.crossing, crossing.name)
        self.assertEqual(first.number, 1)

        reports = Conversation(self.readings.ReportReadings)
        start = time.time_ns()
        for second in range(120):
            tick = reading_pb2.Reading(
                clock=source.name,
                reference="house",
                sequence=second + 1,
                counter=reading_pb2.CounterReading(
                    count=round(44100 * (1 + 37 * PPM) * second) % 2**32,
                    bits=32,
                    reference_ns=start + second * 1_000_000_000,
                ),
            )
            receipt = reports.say(
                reading_pb2.ReportReadingsRequest(batch=second, readings=[tick])
            )
            self.assertEqual((receipt.batch, receipt.accepted), (second, 1))
            self.assertEqual(receipt.level, reading_pb2.RECEIPT_LEVEL_DURABLE)
        reports.end()

        estimate = self.clocks.GetClock(
            clock_pb2.GetClockRequest(name=source.name)
        ).estimate
        self.assertLessEqual(estimate.drift_low, 37 * PPM)
        self.assertGreaterEqual(estimate.drift_high, 37 * PPM)
        self.assertLess(estimate.drift_high - estimate.drift_low, 2 * PPM)

        second_setting = next(watch).setting
        self.assertGreater(second_setting.number, 1)
        wanted = int(second_setting.wanted.numerator) / int(
            second_setting.wanted.denominator
        )
        self.assertAlmostEqual(wanted * 44100 / 48000, 1 - 37 * PPM, delta=25 * PPM)
        watch.cancel()

        told = self.ratios.ExplainSetting(
            ratio_pb2.ExplainSettingRequest(name=second_setting.name)
        )
        self.assertTrue(told.lines)

    def test_bad_declarations_name_the_field(self):
        rate = rate_pb2.Rate(numerator=48000, denominator=0)
        clock = clock_pb2.Clock(name="clocks/zero", nominal_rate=rate)
        error = self.refused(
            grpc.StatusCode.INVALID_ARGUMENT,
            lambda: self.clocks.CreateClock(clock_pb2.CreateClockRequest(clock=clock)),
        )
        fields = violations(error)
        self.assertEqual([field for field, _ in fields], ["clock.nominal_rate.denominator"])
        self.assertIn("0", fields[0][1])
        self.refused(
            grpc.StatusCode.NOT_FOUND,
            lambda: self.clocks.GetClock(clock_pb2.GetClockRequest(name="clocks/zero")),
        )

    def test_an_unknown_mask_path_is_refused(self):
        clock = self.declare("masked", 48000)
        request = clock_pb2.UpdateClockRequest(
            clock=clock, update_mask=FieldMask(paths=["nominal"])
        )
        error = self.refused(
            grpc.StatusCode.INVALID_ARGUMENT, lambda: self.clocks.UpdateClock(request)
        )
        self.assertIn("nominal", violations(error)[0][1])

    def test_bad_readings_are_refused_and_the_stream_goes_on(self):
        clock = self.declare("bent", 48000)
        reports = Conversation(self.readings.ReportReadings)
        start = time.time_ns()

        def reading(name=clock.name, second=1, drift=1e-6):
            frequency = reading_pb2.FrequencyReading(
                drift=drift, deviation=1e-7, reference_ns=start + second * 10**9
            )
            return reading_pb2.Reading(clock=name, reference="house", frequency=frequency)

        def send(*readings):
            return reports.say(reading_pb2.ReportReadingsRequest(readings=readings))

        self.assertEqual(send(reading(second=1)).accepted, 1)
        nan = send(reading(second=2, drift=math.nan))
        self.assertEqual(nan.accepted, 0)
        self.assertEqual(nan.refusals[0].field, "readings[0].frequency.drift")
        self.assertEqual(nan.refusals[0].value, "NaN")
        unknown = send(reading(name="clocks/nobody", second=2))
        self.assertEqual(unknown.refusals[0].field, "readings[0].clock")
        self.assertEqual(unknown.refusals[0].value, "clocks/nobody")
        back = send(reading(second=0))
        self.assertEqual(back.refusals[0].field, "readings[0].frequency.reference_ns")
        oversize = send(*[reading(second=s) for s in range(2, 5000)])
        self.assertEqual(oversize.accepted, 0)
        self.assertEqual(oversize.refusals[0].index, -1)
        self.assertEqual(oversize.refusals[0].value, "4998")
        self.assertEqual(send(reading(second=3)).accepted, 1)
        reports.end()


if __name__ == "__main__":
    unittest.main(verbosity=2)
