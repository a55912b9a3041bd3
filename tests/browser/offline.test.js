// Wet fingers and poor Wi-Fi: whatever happens to the network, the tablet or the server in the middle of a weigh-out,
// every tick is in the record exactly once, and under the name of the person who made it.

import assert from "node:assert/strict";
import { mkdtempSync, readdirSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { after, before, test } from "node:test";
import axe from "axe-core";
import { PASSWORD, signIn, startBrowser, startLeat, startTablet } from "./leat.js";
import { approvedPlan, tokenOf } from "./api.js";
import * as tablets from "./tablet.js";
import { asPlanned, asTyped, band, becomes, count, keptTicks, line, nothingWaits, saved, tap, until } from "./tablet.js";

const SIZES = [[1280, 800], [800, 1280], [390, 844]];

let leat, browser, token;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  const desk = await browser.newContext({ baseURL: leat.address });
  const page = await desk.newPage();
  await signIn(page, "manager");
  token = await tokenOf(page);
  await desk.close();
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

const tablet = (options) => tablets.openTablet(leat, browser, options);
const weighed = (plan) => tablets.weighed(leat, token, plan);
/** Which lines of a plan are in, each of them once. */
async function inOnce(plan) {
  const lines = await weighed(plan);
  for (const dose of lines) assert.equal(dose.times, dose.in ? 1 : 0, JSON.stringify(lines));
  return lines.filter((dose) => dose.in).sort((a, b) => a.place - b.place).map(({ id }) => id);
}

async function everyTickOnce(plan) {
  const lines = await weighed(plan);
  assert.ok(lines.length > 1, "a weigh-out of one line tells little");
  assert.equal((await inOnce(plan)).length, lines.length);
}

for (const size of SIZES) {
  test(`the network goes and comes back in the middle of a weigh-out, ${size.join(" × ")}`, async () => {
    const plan = await approvedPlan(leat, token);
    const { context, page, close } = await tablet({ size });
    await page.goto(`${plan}/weigh-out`);
    const lines = await count(page);
    await saved(page, await tap(page));
    await context.setOffline(true);
    await page.locator(".queue-notice", { hasText: "No network" }).waitFor();
    await tap(page);
    await band(page, "No network: 1 tick waits on this tablet");
    for (let more = 2; more < lines; more += 1) await tap(page);
    await page.locator(".queue-notice", { hasText: "Every line is ticked" }).waitFor();
    assert.equal((await inOnce(plan)).length, 1);
    await context.setOffline(false);
    await page.getByText("Everything planned is in.").waitFor();
    await nothingWaits(page);
    await everyTickOnce(plan);
    await close();
  });
}

test("a browser that is killed while ticks wait sends them when it is opened again", async () => {
  const plan = await approvedPlan(leat, token);
  const folder = mkdtempSync(path.join(tmpdir(), "leat-tablet-"));
  let context = await startTablet(folder, tablets.held(leat));
  let page = context.pages()[0];
  await signIn(page, "brewer");
  await page.goto(`${plan}/weigh-out`);
  await context.setOffline(true);
  const ticked = [await tap(page), await tap(page)];
  killBrowser(folder);
  context = await startTablet(folder, tablets.held(leat));
  page = context.pages()[0];
  // A browser that was killed forgets who was signed in; the ticks are still there, and say whose they are.
  await page.goto(`${leat.address}/sign-in`);
  await band(page, /2 ticks wait on this tablet until .* signs in/);
  assert.deepEqual(await inOnce(plan), []);
  await signIn(page, "brewer");
  await nothingWaits(page);
  assert.deepEqual(await inOnce(plan), ticked);
  await context.close();
  rmSync(folder, { recursive: true, force: true });
});

/** Kills every process of the browser that keeps its things in this folder, as a dead battery would. */
function killBrowser(folder) {
  for (const id of readdirSync("/proc").filter((name) => /^\d+$/.test(name))) {
    try {
      if (readFileSync(`/proc/${id}/cmdline`, "utf8").includes(folder)) process.kill(Number(id), "SIGKILL");
    } catch { /* it has ended already */ }
  }
}

test("a double tap ticks one line, and so does a tap on a page that lags", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  const first = await line(page);
  await asPlanned(page).scrollIntoViewIfNeeded();
  const box = await asPlanned(page).boundingBox();
  const [x, y] = [box.x + box.width / 2, box.y + box.height / 2];
  for (let taps = 0; taps < 4; taps += 1) { await page.touchscreen.tap(x, y); await page.waitForTimeout(60); }
  await becomes(page, first, true);
  await saved(page, first);
  await page.waitForTimeout(800);
  assert.deepEqual(await inOnce(plan), [first]);
  await close();
});

test("back, and a reload in the moment of a tap, lose nothing and double nothing", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(plan);
  await page.goto(`${plan}/weigh-out`);
  await asPlanned(page).tap({ noWaitAfter: true });
  await page.reload();
  await nothingWaits(page);
  // The reload may have come before the tick was kept: then the page still offers the line.
  assert.ok((await inOnce(plan)).length <= 1);
  await page.reload();
  await saved(page, await tap(page));
  await page.goBack();
  await page.goForward();
  while (await asPlanned(page).isVisible()) await tap(page);
  await page.getByText("Everything planned is in.").waitFor();
  await everyTickOnce(plan);
  await close();
});

test("two tablets on one weigh-out, one of them without network: each line is in once, and the late one is told by whom", async () => {
  const plan = await approvedPlan(leat, token);
  const [one, other] = [await tablet(), await tablet({ who: "qa" })];
  await one.page.goto(`${plan}/weigh-out`);
  await other.page.goto(`${plan}/weigh-out`);
  const lines = await count(one.page);
  await other.context.setOffline(true);
  await tap(other.page);
  await tap(one.page);
  await one.page.locator("[data-line-state][data-state=saved]").first().waitFor();
  await other.context.setOffline(false);
  await other.page.locator(".problem-summary", { hasText: /weighed this in already/ }).waitFor();
  await other.page.getByRole("button", { name: "I have seen this" }).first().tap();
  await nothingWaits(other.page);
  for (let left = 1; left < lines; left += 1) await tap(left % 2 ? other.page : one.page).then(() => settle(one.page, other.page, plan));
  await everyTickOnce(plan);
  await one.close();
  await other.close();
});

/** Both tablets look again, as people do who work side by side. */
async function settle(one, other, plan) {
  await nothingWaits(one);
  await nothingWaits(other);
  await one.goto(`${plan}/weigh-out`);
  await other.goto(`${plan}/weigh-out`);
}

test("two windows of one tablet keep a line once", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  const second = await context.newPage();
  await second.goto(`${plan}/weigh-out`);
  await context.setOffline(true);
  const first = await tap(page);
  await becomes(second, first, true);
  await second.waitForTimeout(800);
  const next = await tap(second);
  await band(page, "No network: 2 ticks wait on this tablet");
  await context.setOffline(false);
  await nothingWaits(page);
  await nothingWaits(second);
  assert.deepEqual(await inOnce(plan), [first, next]);
  await close();
});

test("a server that is killed between tick and answer has the tick once after the restart", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  // The server hears the tick and writes it; nobody hears the answer.
  await page.route("**/doses/*", async (route) => {
    await route.fetch({ maxRedirects: 0 });
    await leat.kill();
    await route.abort();
  }, { times: 1 });
  const first = await tap(page);
  await band(page, /1 tick waits on this tablet/);
  const second = await tap(page);
  await band(page, /2 ticks wait on this tablet/);
  await leat.startAgain();
  await nothingWaits(page);
  assert.deepEqual(await inOnce(plan), [first, second]);
  await close();
});

test("a server that is gone for the whole weigh-out gets every tick when it is back, in the order they were made", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  const ticked = [];
  await leat.kill();
  for (let left = await count(page); left > 0; left -= 1) ticked.push(await tap(page));
  await page.locator(".queue-notice", { hasText: "Every line is ticked" }).waitFor();
  await leat.startAgain();
  await page.getByText("Everything planned is in.").waitFor({ timeout: 45_000 });
  assert.deepEqual(await inOnce(plan), ticked);
  await close();
});

test("a tick is sent in nobody’s name but that of who made it", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  await context.setOffline(true);
  const ticked = await tap(page);
  await band(page, "No network: 1 tick waits on this tablet");
  // Another signs in on this tablet, in another window: this page is still the first one’s, the cookie is not.
  const second = await context.newPage();
  await context.clearCookies();
  await context.setOffline(false);
  await band(page, "Sign in again: 1 tick waits on this tablet");
  await signIn(second, "manager");
  await band(second, /1 tick waits on this tablet until .* signs in here/);
  await second.goto(`${plan}/weigh-out`);
  await becomes(second, ticked, true);
  await second.waitForTimeout(1500);
  assert.deepEqual(await inOnce(plan), []);
  await signIn(second, "brewer");
  await nothingWaits(second);
  const [dose] = (await weighed(plan)).filter(({ id }) => id === ticked);
  const me = await second.locator("body").getAttribute("data-member-name");
  assert.deepEqual([dose.times, dose.by], [1, me]);
  await close();
});

test("an amount the server asks about comes back with its question, and is in once it is answered", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  await context.setOffline(true);
  const asked = await line(page);
  const planned = Number(await page.locator(`[data-line="${asked}"]`).getAttribute("data-planned"));
  const field = page.locator(`[data-line="${asked}"] [name=actual]`);
  await field.fill(String(planned * 2));
  await asTyped(page).tap();
  await becomes(page, asked, true);
  await context.setOffline(false);
  await becomes(page, asked, false);
  assert.equal(await field.inputValue(), String(planned * 2), "as it was typed");
  await page.locator(`[data-line="${asked}"]`).getByText("Mend the amount, or say why.").waitFor();
  await page.getByRole("columnheader", { name: "What it does" }).waitFor();
  await page.locator(`[data-line="${asked}"] [name=reason]`).fill("The bag was torn.");
  await asTyped(page).tap();
  await saved(page, asked);
  assert.deepEqual(await inOnce(plan), [asked]);
  await close();
});

test("with a network the question comes before the next line", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  const asked = await line(page);
  await page.locator(`[data-line="${asked}"] [name=actual]`).fill("0,5");
  await asTyped(page).tap();
  await page.locator(`[data-line="${asked}"]`).getByText("Mend the amount, or say why.").waitFor();
  assert.equal(await line(page), asked);
  assert.equal(await page.locator(`[data-line="${asked}"] [name=actual]`).inputValue(), "0,5");
  await close();
});

test("a tick that was never sent can be withdrawn", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  await context.setOffline(true);
  const ticked = await tap(page);
  await page.locator(".queue-notice summary").tap();
  await page.getByRole("button", { name: "Withdraw" }).tap();
  await nothingWaits(page);
  await page.locator(`[data-line="${ticked}"]`).waitFor({ state: "attached" });
  assert.equal(await page.locator(`[data-line-state="${ticked}"]`).getAttribute("data-state"), null);
  await context.setOffline(false);
  await page.waitForTimeout(500);
  assert.deepEqual(await inOnce(plan), []);
  await close();
});

test("a line that needs a second person waits for the network, and no secret is kept on the tablet", async () => {
  const desk = await tablet({ who: "manager" });
  const onlookers = async (choice) => {
    await desk.page.goto("/settings");
    await desk.page.locator("[name=second_person]").selectOption(choice);
    await desk.page.locator("main").getByRole("button", { name: "Save" }).tap();
    await desk.page.locator(".flash").waitFor();
  };
  await onlookers("acid_and_lime");
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  const acid = await page.locator("[data-line]:has(form[data-needs-network])").first().getAttribute("data-line");
  while ((await line(page)) !== acid) await tap(page);
  await nothingWaits(page);
  const form = page.locator(`[data-line="${acid}"]`);
  await form.locator("[name=second_person_id]").selectOption({ index: 1 });
  await form.locator("[name=second_person_secret]").fill(PASSWORD);
  await context.setOffline(true);
  await asPlanned(page).tap();
  await form.getByText("This line waits for the network").waitFor();
  assert.equal(await line(page), acid);
  assert.ok((await keptTicks(page)).every((tick) => tick.line !== acid && !tick.body.includes("secret")));
  // With it, the line is ticked without leaving the page.
  await context.setOffline(false);
  await asPlanned(page).tap();
  await until(async () => (await inOnce(plan)).includes(acid));
  await onlookers("never");
  await close();
  await desk.close();
});

for (const colorScheme of ["light", "dark"]) {
  test(`what a lost network adds to a page can be read by other means and touched with gloves, ${colorScheme}`, async () => {
    const plan = await approvedPlan(leat, token);
    const { context, page, close } = await tablet({ size: [390, 844], colorScheme });
    await page.goto(`${plan}/weigh-out`);
    await context.setOffline(true);
    await tap(page);
    await page.waitForTimeout(800);
    await page.locator(".queue-notice summary").tap();
    await page.evaluate(axe.source);
    const { violations } = await page.evaluate(() => globalThis.axe.run(document, { resultTypes: ["violations"] }));
    assert.deepEqual(violations.map(({ id, nodes }) => `${id}: ${nodes.map(({ target }) => target).join(" ")}`), []);
    const small = await page.locator(".queue-chip, .queue-notice button, .queue-notice summary").evaluateAll((all) => all
      .map((each) => each.getBoundingClientRect()).filter(({ width, height }) => Math.min(width, height) < 47.9).length);
    assert.equal(small, 0);
    assert.ok((await page.evaluate(() => document.documentElement.scrollWidth)) <= 390);
    await close();
  });
}

test("without scripts every line is ticked by taps as well", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet({ javaScriptEnabled: false });
  await page.goto(`${plan}/weigh-out`);
  for (const _ of await weighed(plan)) {
    await asPlanned(page).tap();
    await page.waitForLoadState();
  }
  await page.getByText("Everything planned is in.").waitFor();
  await everyTickOnce(plan);
  await close();
});
