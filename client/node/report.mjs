// Declares a clock, reports readings of it and prints the receipts, then follows a crossing of it: with
// grpc-js and nothing of ratewright's own.
//
//     npm install
//     node report.mjs 127.0.0.1:7420
//
// The readings are made up: a 48 kHz clock that runs 12 ppm fast, counted once a second against house time.

import path from "node:path";
import grpc from "@grpc/grpc-js";
import loader from "@grpc/proto-loader";

const proto = path.resolve(import.meta.dirname, "../../proto");
const files = ["clock", "crossing", "ratio", "reading"].map((name) => `ratewright/v1/${name}.proto`);
const definition = loader.loadSync(files, {
  includeDirs: [proto],
  // 64-bit integers do not fit a double: they travel as text.
  longs: String,
  enums: String,
  defaults: true,
  oneofs: true,
});
const { v1 } = grpc.loadPackageDefinition(definition).ratewright;

const address = process.argv[2] ?? "127.0.0.1:7420";
const insecure = grpc.credentials.createInsecure();
const clocks = new v1.ClockService(address, insecure);
const crossings = new v1.CrossingService(address, insecure);
const readings = new v1.ReadingService(address, insecure);
const ratios = new v1.RatioService(address, insecure);

function call(service, method, request) {
  return new Promise((resolve, reject) => {
    service[method](request, (fault, answer) => (fault ? reject(fault) : resolve(answer)));
  });
}

const tag = `node${Date.now()}`;
const rate = { numerator: "48000", denominator: "1" };
await call(clocks, "CreateClock", { clock: { name: `clocks/${tag}`, nominalRate: rate } });
await call(clocks, "CreateClock", {
  clock: { name: `clocks/${tag}-house`, nominalRate: rate, exact: true },
});
const crossing = `crossings/${tag}`;
await call(crossings, "CreateCrossing", {
  crossing: {
    name: crossing,
    sourceClock: `clocks/${tag}`,
    sinkClock: `clocks/${tag}-house`,
    maxL: "1024",
    maxM: "1024",
    headroomSamples: 2,
    realisation: "REALISATION_CADENCE",
  },
});

// House time, from an exchange: ns since 1970-01-01, TAI-like, so not Date.now(). The way here took a moment,
// but only differences matter to these readings.
const { t2Ns } = await call(readings, "ExchangeTime", { t1Ns: "0" });
const begins = BigInt(t2Ns) - 120_000_000_000n;
const batch = Array.from({ length: 120 }, (_, second) => ({
  clock: `clocks/${tag}`,
  reference: "house",
  counter: {
    count: String(Math.floor(second * 48000 * (1 + 12e-6))),
    referenceNs: String(begins + BigInt(second) * 1_000_000_000n),
  },
}));
const report = readings.ReportReadings();
const receipt = await new Promise((resolve, reject) => {
  report.on("data", resolve).on("error", reject);
  report.write({ batch: "1", readings: batch, receipt: "RECEIPT_LEVEL_DURABLE" });
});
report.end();
console.log(`receipt: ${receipt.accepted} taken in, ${receipt.refusals.length} refused, ${receipt.level}`);

const { estimate } = await call(clocks, "GetClock", { name: `clocks/${tag}` });
const ppm = (drift) => (drift * 1e6).toFixed(2);
console.log(`drift ${ppm(estimate.drift)} ppm, within ${ppm(estimate.driftLow)} to ${ppm(estimate.driftHigh)}`);

// Follow until a setting rests on these readings: the first was made when the clock was not measured yet.
const follow = ratios.FollowSettings();
follow.write({ select: { crossings: [crossing] } });
const setting = await new Promise((resolve, reject) => {
  follow.on("error", reject).on("data", (heard) => {
    if (heard.message !== "setting") return;
    const { name, realisation, wanted, reason } = heard.setting;
    const ratio = Number(wanted.numerator) / Number(wanted.denominator);
    console.log(`${name}: ${realisation}, wanted ${ratio.toFixed(9)}, ${reason}`);
    const said = () => reason !== "SETTING_REASON_FIRST" && resolve(heard.setting);
    follow.write({ applied: { setting: name, houseNs: heard.houseNs } }, said);
  });
});
follow.removeAllListeners("error").on("error", () => {}); // its own end, below
follow.cancel();
console.log(`followed to ${setting.name}`);
[clocks, crossings, readings, ratios].forEach((service) => service.close());
