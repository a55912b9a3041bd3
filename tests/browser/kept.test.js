// Where the browser gives a service worker (over https, or on the machine itself, as here): a weigh-out that opens with
// no network at all, and nothing kept for the next person.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import { signIn, startBrowser, startLeat } from "./leat.js";
import { approvedPlan, tokenOf } from "./api.js";
import { band, count, nothingWaits, openTablet, tap, until, weighed } from "./tablet.js";

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

const tablet = () => openTablet(leat, browser, { serviceWorkers: "allow" });
const keys = (page) => page.evaluate(async () => (await (await caches.open("leat-kept")).keys()).map((key) => new URL(key.url).pathname));
/** The addresses of the pages that are kept, once there are some. */
async function kept(page) {
  await until(async () => (await keys(page)).length > 0);
  return keys(page);
}

test("a weigh-out opens with no network at all, says how old it is, and takes ticks", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  assert.deepEqual(await kept(page), [`${plan}/weigh-out`]);
  const lines = await count(page);
  await tap(page);
  await nothingWaits(page);
  await context.setOffline(true);
  await page.reload();
  await page.locator(".queue-notice", { hasText: /Kept copy from \d/ }).waitFor();
  await page.waitForFunction((left) => document.querySelectorAll("[data-line-state][data-state=saved]").length === left, 1);
  await tap(page);
  // The tablet’s browser is closed and opened again, still without network.
  await page.close();
  const again = await context.newPage();
  await again.goto(`${plan}/weigh-out`);
  await band(again, "No network: 1 tick waits on this tablet");
  for (let left = lines - 2; left > 0; left -= 1) await tap(again);
  await context.setOffline(false);
  await again.getByText("Everything planned is in.").waitFor();
  const doses = await weighed(leat, token, plan);
  assert.ok(doses.length > 1 && doses.every((dose) => dose.in && dose.times === 1), JSON.stringify(doses));
  await close();
});

test("what is kept of a person goes when they sign out, and when another signs in", async () => {
  const plan = await approvedPlan(leat, token);
  const { context, page, close } = await tablet();
  const leave = [
    () => page.locator("form[action='/sign-out'] button").tap(),
    async () => { await context.clearCookies(); await signIn(page, "manager"); },
  ];
  for (const step of leave) {
    await page.goto(`${plan}/weigh-out`);
    assert.deepEqual(await kept(page), [`${plan}/weigh-out`]);
    await step();
    await until(async () => (await keys(page)).length === 0);
    await context.setOffline(true);
    await page.goto(`${plan}/weigh-out`);
    await page.getByRole("heading", { name: "No network" }).waitFor();
    await page.getByText("No weigh-out is kept on this tablet.").waitFor();
    await context.setOffline(false);
    await signIn(page, "brewer");
  }
  await close();
});

test("nothing else is kept: no other page, no answer of the API, no form", async () => {
  const plan = await approvedPlan(leat, token);
  const { page, close } = await tablet();
  await page.goto(`${plan}/weigh-out`);
  await kept(page);
  for (const address of ["/", plan, "/record", "/people", "/settings", `${plan}/mash-checks/new`, "/help/api"]) await page.goto(address);
  const addresses = await page.evaluate(async () => {
    const names = await caches.keys();
    const all = await Promise.all(names.map(async (name) => (await (await caches.open(name)).keys()).map((key) => new URL(key.url).pathname)));
    return all.flat();
  });
  assert.deepEqual(addresses.filter((address) => !address.startsWith("/assets/")), [`${plan}/weigh-out`]);
  await close();
});
