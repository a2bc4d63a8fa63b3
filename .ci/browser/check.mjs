// Looks at every view of the page in a real browser, as a reader with a mouse, with a keyboard, on a phone and
// in the dark would, over the sample facility.
//
//     node check.mjs http://127.0.0.1:7421 FOLDER    pictures of what was seen go to FOLDER
//
// Held to: live without reloading, the planner's answer and its faults, every place reached by the keyboard
// with a focus that can be seen, no serious finding of the accessibility checker, no request to another host,
// no error on the console, nothing wider than a phone.

import assert from "node:assert/strict";
import fs from "node:fs";
import { createRequire } from "node:module";
import path from "node:path";
import puppeteer from "puppeteer-core";

const [origin = "http://127.0.0.1:7421", folder = "artifacts"] = process.argv.slice(2);
const axe = fs.readFileSync(createRequire(import.meta.url).resolve("axe-core"), "utf8");
fs.mkdirSync(folder, { recursive: true });

const browser = await puppeteer.launch({ executablePath: "/usr/bin/chromium", args: ["--no-sandbox"] });
const page = await browser.newPage();
const faults = [];
page.on("console", (said) => {
  // A question that cannot be planned is answered with a page and status 400, which the browser mentions.
  const expected = said.text().includes("status of 400") && page.url().includes("nonsense");
  if (said.type() === "error" && !expected) faults.push(`console: ${said.text()}`);
});
page.on("pageerror", (fault) => faults.push(`script: ${fault.message}`));
page.on("request", (asked) => {
  const url = asked.url();
  if (!url.startsWith(origin) && !url.startsWith("data:")) faults.push(`asked another host: ${url}`);
});

const desk = { width: 1280, height: 900 };
const phone = { width: 390, height: 844, isMobile: true, hasTouch: true };

async function open(where) {
  const answer = await page.goto(origin + where, { waitUntil: "load" });
  const wanted = where.includes("nonsense") ? 400 : 200;
  assert.equal(answer.status(), wanted, where);
  return where;
}

async function texts(selector) {
  return page.$$eval(selector, (found) => found.map((one) => one.textContent.trim()));
}

// The whole view in every look, and what the accessibility checker finds.
async function look(where, name) {
  for (const [view, viewport, scheme] of [
    ["light", desk, "light"],
    ["dark", desk, "dark"],
    ["phone", phone, "light"],
  ]) {
    await page.setViewport(viewport);
    await page.emulateMediaFeatures([{ name: "prefers-color-scheme", value: scheme }]);
    await open(where);
    await page.screenshot({ path: path.join(folder, `${name}-${view}.png`), fullPage: true });
    await page.evaluate(axe);
    const { violations } = await page.evaluate(() => axe.run(document, { resultTypes: ["violations"] }));
    for (const { id, impact, nodes } of violations) {
      if (impact !== "serious" && impact !== "critical") continue;
      faults.push(`${where}, ${view}: ${id} (${impact}): ${nodes.map((node) => node.html.slice(0, 120)).join(" | ")}`);
    }
    const wide = await page.evaluate(() => document.documentElement.scrollWidth - window.innerWidth);
    if (wide > 0) faults.push(`${where}, ${view}: ${wide} pixels wider than the window`);
  }
  await page.setViewport(desk);
  await page.emulateMediaFeatures([{ name: "prefers-color-scheme", value: "light" }]);
}

async function seenLive() {
  await open("/");
  await page.evaluate(() => (window.stays = true));
  const before = await page.$eval("#stamp", (stamp) => stamp.textContent);
  const renewed = (old) => document.querySelector("#stamp").textContent !== old && window.stays;
  await page.waitForFunction(renewed, { timeout: 20_000 }, before);
  await page.click("#hold");
  assert.equal(await page.$eval("#hold", (hold) => hold.ariaPressed), "true");
  console.log("live: renewed in place, and held still when told to");
}

async function planned() {
  await open("/plan");
  for (const [field, value] of [["from", "44100"], ["to", "48000"], ["max_l", "256"], ["max_m", "256"]]) {
    await page.$eval(`#${field}`, (input) => (input.value = ""));
    await page.type(`#${field}`, value);
  }
  await Promise.all([page.waitForNavigation(), page.click("#planner button[type=submit]")]);
  const shared = page.url();
  assert.match(shared, /from=44100/, "the question is in the address");
  assert.match((await texts("main")).join(), /160\/147/, "the answer to 44.1 kHz into 48 kHz");
  await page.goto(shared);
  assert.match((await texts("main")).join(), /160\/147/, "the address alone gives the answer");
  await page.goto(`${origin}/plan?from=nonsense&to=48000`);
  assert.equal(await page.$eval("#from", (input) => input.getAttribute("aria-invalid")), "true");
  assert.match((await texts("#from-fault")).join(), /accepted/i, "a fault names its field and what is accepted");
  console.log("planner: answered, shared by its address, and a fault told at its field");
}

// Tab through the front page: every link is reached, and it can be seen where one is.
async function walkedByKeyboard() {
  await open("/");
  // Held still without a mouse, which would be where the keyboard begins.
  await page.$eval("#hold", (hold) => hold.click());
  const reached = new Set();
  const seen = [];
  for (let i = 0; i < 400; i++) {
    await page.keyboard.press("Tab");
    const at = await page.evaluate(() => {
      const { activeElement: one } = document;
      if (one === document.body) return null;
      const style = getComputedStyle(one);
      const visible = style.outlineStyle !== "none" || style.boxShadow !== "none" || style.textDecorationLine !== "none";
      return { key: one.getAttribute("href") ?? one.id, visible };
    });
    if (at === null || (reached.has(at.key) && at.key === seen[0])) break;
    if (!at.visible) faults.push(`keyboard: it cannot be seen that ${at.key} has the focus`);
    reached.add(at.key);
    seen.push(at.key);
  }
  const links = await page.$$eval("a[href]", (all) => all.map((one) => one.getAttribute("href")));
  const missed = links.filter((link) => !reached.has(link));
  assert.deepEqual(missed, [], "links that the keyboard does not reach");
  assert.equal(seen[0], "#main", "the first stop leads past the header");
  // Down to a crossing and to why it was set so, with nothing but the keyboard.
  await page.focus('a[href^="/crossings/"]');
  await Promise.all([page.waitForNavigation(), page.keyboard.press("Enter")]);
  await page.focus('main a[href*="/settings/"]');
  await Promise.all([page.waitForNavigation(), page.keyboard.press("Enter")]);
  assert.ok((await texts("#explanation")).join().length > 100, "the setting is explained");
  console.log(`keyboard: ${reached.size} places, and down to an explanation`);
}

try {
  await open("/crossings");
  const crossing = await page.$eval('tr[id^="crossing-"] a[href^="/crossings/"]', (a) => a.getAttribute("href"));
  await open("/clocks");
  const clock = await page.$eval('tr[id^="clock-"] a[href^="/clocks/"]', (a) => a.getAttribute("href"));
  await open(`${crossing}/settings`);
  const setting = await page.$eval('tr[id^="setting-"] a', (a) => a.getAttribute("href"));
  const views = {
    facility: "/",
    crossings: "/crossings",
    clocks: "/clocks",
    changes: "/changes",
    crossing,
    clock,
    settings: `${crossing}/settings`,
    setting,
    plan: "/plan",
    "plan-answer": "/plan?from=44.1k&to=48k&from_drift=12.5&from_width=0.3&headroom=4&passband=20000",
    "plan-fault": "/plan?from=nonsense&to=48k",
    search: "/crossings?q=house",
  };
  for (const [name, where] of Object.entries(views)) await look(where, name);
  console.log(`views: ${Object.keys(views).length}, each in light, dark and on a phone; pictures in ${folder}`);
  await seenLive();
  await planned();
  await walkedByKeyboard();
} catch (fault) {
  faults.push(fault.stack);
} finally {
  await browser.close();
}
for (const fault of new Set(faults)) console.error(fault);
process.exit(faults.length === 0 ? 0 : 1);
