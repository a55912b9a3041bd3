// The wait for the next reading: it ends when the server says, whatever the tablet does meanwhile.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import { openWindow, signIn, startBrowser, startLeat } from "./leat.js";
import { approvedPlan, ask, calibratedMeter, tokenOf } from "./api.js";

let leat, browser, window, page, token, meter;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  window = await openWindow(browser, leat);
  page = window.page;
  // Counts what is sounded: nobody listens here.
  await window.context.addInitScript(() => {
    globalThis.tones = 0;
    const start = OscillatorNode.prototype.start;
    OscillatorNode.prototype.start = function (...at) { globalThis.tones += 1; return start.apply(this, at); };
  });
  await signIn(page, "manager");
  token = await tokenOf(page);
  meter = await calibratedMeter(leat, token);
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

const seconds = (words) => { const [, minutes, rest] = words.match(/in (\d+):(\d\d)$/); return 60 * Number(minutes) + Number(rest); };
const clock = () => page.locator(".timer-clock").first();

/** A plan in the mash whose first step is in: the page of its reading, and of its plan. */
async function waiting() {
  const plan = await approvedPlan(leat, token);
  const { doses } = await ask(leat, token, "GET", plan);
  for (const dose of doses) await ask(leat, token, "PUT", `${plan}/doses/${dose.id}`, { actual: dose.planned });
  const reading = { ph: 5.66, minute: 12, sample_c: 20, meter_id: meter, meter_checked: true };
  const { id } = await ask(leat, token, "POST", `${plan}/mash-checks`, reading, 201);
  await page.goto(`${plan}/mash-checks/${id}`);
  await page.locator(".put-right-step").waitFor();
  await page.getByRole("button", { name: /It is in the/ }).click();
  await clock().waitFor();
  return { plan, address: `${plan}/mash-checks/${id}` };
}

test("it counts on over a reload, on every page of the batch and in the title of the tab", async () => {
  const { plan, address: reading } = await waiting();
  const at = seconds(await clock().innerText());
  assert.ok(at > 60 && at <= 20 * 60, `${at} s`);
  await page.waitForTimeout(2100);
  await page.reload();
  const later = seconds(await clock().innerText());
  assert.ok(later <= at - 2 && later >= at - 8, `${at} s, then ${later} s`);
  for (const address of [plan, `${plan}/mash-checks/new`, "/", reading]) {
    await page.goto(address);
    const left = seconds(await clock().innerText());
    assert.ok(left <= later && left >= later - 15, `${left} s on ${address}`);
    assert.match(await page.title(), /^\d+:\d\d · /);
  }
});

/** The page of a reading whose wait ends in two seconds, on a tablet whose clock is an hour wrong. */
async function endsSoon() {
  const { address: reading } = await waiting();
  const wrong = (text) => {
    const now = Date.now() - 3_600_000;
    return text.replace(/data-now="[^"]*"/, `data-now="${new Date(now).toISOString()}"`)
      .replace(/data-timer-ends="[^"]*"/g, `data-timer-ends="${new Date(now + 3000).toISOString()}"`);
  };
  await page.route(`**${reading}`, async (route) => {
    const answer = await route.fetch();
    await route.fulfill({ response: answer, body: wrong(await answer.text()) });
  });
  await page.goto(reading);
}

test("a tablet whose clock is wrong counts as the server does, and says when it is over", async () => {
  await endsSoon();
  assert.ok(seconds(await clock().innerText()) <= 3);
  await page.locator(".timer.over[role=alert]", { hasText: "Read the mash now" }).waitFor();
  assert.match(await page.title(), /^Read the mash now · /);
  assert.equal(await page.evaluate(() => globalThis.tones), 0, "silent until it is told otherwise");
});

test("it sounds where the device was told so, and remembers that", async () => {
  await endsSoon();
  await page.getByRole("button", { name: "Sound on" }).click();
  await page.getByRole("button", { name: "Sound is on" }).waitFor();
  await page.reload();
  await page.getByRole("heading", { level: 1 }).click(); // A page sounds only after somebody touched it.
  await page.locator(".timer.over").waitFor();
  assert.ok((await page.evaluate(() => globalThis.tones)) >= 3);
  await page.getByRole("button", { name: "Sound is on" }).click();
});

test("no page complained", () => window.close());
