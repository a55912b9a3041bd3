// A tablet by the mash tun, held by somebody with wet gloves, and what the record says of what they did.

import assert from "node:assert/strict";
import { signIn } from "./leat.js";
import { ask } from "./api.js";

/** How a tablet of this size is held; as on plain http, where there is no service worker. */
export function held(leat, [width, height] = [1280, 800], options = {}) {
  return { baseURL: leat.address, viewport: { width, height }, isMobile: true, hasTouch: true, reducedMotion: "reduce", serviceWorkers: "block", ...options };
}

/** A tablet on which somebody has signed in. */
export async function openTablet(leat, browser, { size, who = "brewer", ...options } = {}) {
  const context = await browser.newContext(held(leat, size, options));
  context.setDefaultTimeout(15_000);
  const page = await context.newPage();
  const refused = [];
  // What the browser says of a lost network is no fault of a page; what it says of its policy or a script is.
  context.on("console", (message) => { if (/Content Security Policy|Refused to/.test(message.text())) refused.push(message.text()); });
  context.on("weberror", (error) => refused.push(String(error.error())));
  await signIn(page, who);
  return { context, page, async close() { await context.close(); assert.deepEqual(refused, []); } };
}

const shown = (page) => page.locator("[data-line]:not([hidden])");
/** The button that takes the planned amount of the line that is shown. */
export const asPlanned = (page) => shown(page).getByRole("button", { name: /^As planned/ });
/** The one that takes what was typed. */
export const asTyped = (page) => shown(page).getByRole("button", { name: /^It is in the/ });
/** The line that is shown. */
export const line = (page) => shown(page).getAttribute("data-line");
/** How many lines are still to do, as far as the server knows. */
export const count = (page) => page.locator("[data-line]").count();
/** Waits until a line is saved. */
export const saved = (page, id) => page.locator(`[data-line-state="${id}"][data-state=saved]`).waitFor();
/** Waits until the band of the page says this. */
export const band = (page, words) => page.locator(".queue-chip", { hasText: words }).waitFor();
/** Waits until a line is shown or not. */
export const becomes = (page, id, hidden, timeout = 15_000) => page.waitForFunction(([wanted, state]) => document.querySelector(`[data-line="${wanted}"]`)?.hidden === state, [id, hidden], { timeout });

/** Ticks the line that is shown and waits for the next, or for none. */
export async function tap(page) {
  const was = await line(page);
  await asPlanned(page).tap();
  await page.waitForFunction((id) => document.querySelector(`[data-line="${id}"]`)?.hidden !== false, was);
  return was;
}

/** Everything that is kept on the tablet, as its browser holds it. */
export function keptTicks(page) {
  return page.evaluate(() => new Promise((done, failed) => {
    const request = indexedDB.open("leat");
    request.onerror = () => failed(request.error);
    request.onsuccess = () => {
      const { result: db } = request;
      const ticks = db.transaction("ticks").objectStore("ticks").getAll();
      ticks.onsuccess = () => { db.close(); done(ticks.result); };
    };
  }));
}

/** Waits until nothing waits on the tablet, and the page says nothing of it. */
export async function nothingWaits(page) {
  // The page may be on its way to the next while it is asked.
  await until(async () => (await keptTicks(page).catch(() => [{}])).every(({ state }) => state === "saved"));
  await page.locator(".queue-chip").waitFor({ state: "detached" });
}

export async function until(happened, patience = 45_000) {
  for (const end = Date.now() + patience; !(await happened()); await new Promise((later) => setTimeout(later, 50))) {
    assert.ok(Date.now() < end, `waited in vain until ${happened}`);
  }
}

/** What the record has of a plan, in the order of its lines: { id, in, times, by, place in the book }. */
export async function weighed(leat, token, plan) {
  const { doses } = await ask(leat, token, "GET", plan);
  const entries = [];
  for (let cursor = ""; cursor !== undefined;) {
    const found = await ask(leat, token, "GET", `/record?limit=200${cursor && `&cursor=${cursor}`}`);
    entries.push(...found.items);
    cursor = found.next_cursor;
  }
  return doses.map(({ id, actual }) => {
    const ticks = entries.filter((entry) => entry.action === "weighed in" && entry.subject_id === id);
    return { id, in: actual !== null && actual !== undefined, times: ticks.length, by: ticks.map((entry) => entry.member_name).join(), place: ticks[0]?.seq };
  });
}
