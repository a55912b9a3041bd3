// A tablet that several people share: names, PINs, and what happens when nobody touches it.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import axe from "axe-core";
import { PASSWORD, openWindow, signIn, startBrowser, startLeat } from "./leat.js";

const PINS = { "Marsh Leatward": "482913", "Quill Assay": "719402", "Rush Mashman": "550134" };

let leat, browser;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  const desk = await openWindow(browser, leat);
  await signIn(desk.page, "manager");
  for (const [name, pin] of Object.entries(PINS)) {
    await desk.page.goto("/people");
    await desk.page.getByRole("link", { name }).first().click();
    await desk.page.getByLabel("New PIN").fill(pin);
    const own = desk.page.getByLabel("Your password, to show it is you");
    if (await own.count()) await own.fill(PASSWORD);
    await desk.page.getByRole("button", { name: "Set the PIN" }).click();
    await desk.page.getByText("The PIN is set").waitFor();
  }
  await desk.close();
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

/** A device that the manager enrolled from itself, showing the names. */
async function tablet(name, options) {
  const window = await openWindow(browser, leat, { hasTouch: true, ...options });
  const { page } = window;
  // The clock is moved by minutes at a time, and every tick of them asks the server something.
  window.context.setDefaultTimeout(45_000);
  await page.clock.install();
  page.on("dialog", (dialog) => dialog.accept());
  await signIn(page, "manager");
  await page.goto("/tablets");
  await page.getByLabel("What to call it").fill(name);
  await page.getByRole("button", { name: "Enrol this device" }).tap();
  await page.getByRole("heading", { name: "Who is here?" }).waitFor();
  return window;
}

/** One tap and a PIN: nothing to tap between them. */
async function enter(page, name) {
  await page.getByRole("button", { name }).tap();
  await page.getByRole("heading", { level: 1, name }).waitFor();
  await page.keyboard.type(PINS[name]);
  await page.keyboard.press("Enter");
  await page.locator(".person-name", { hasText: name }).waitFor();
}

test("left alone it goes back to the names, and what was typed comes back to whoever left it", async () => {
  const window = await tablet("Mash tun");
  const { page } = window;
  await page.goto("/sources/new");
  await enter(page, "Quill Assay");
  assert.equal(new URL(page.url()).pathname, "/sources/new");
  const field = page.getByLabel("Name", { exact: true });
  await field.fill("Well behind the malt store");

  // Somebody who goes on touching it is left in peace.
  for (let minute = 0; minute < 7; minute += 1) {
    await page.clock.runFor("01:00");
    await page.mouse.wheel(0, 10);
  }
  assert.equal(await field.inputValue(), "Well behind the malt store");
  await page.clock.runFor("05:05");
  await page.getByRole("heading", { name: "Who is here?" }).waitFor();

  // Another person is on the same page, and sees nothing of it.
  await enter(page, "Marsh Leatward");
  assert.equal(new URL(page.url()).pathname, "/sources/new");
  assert.equal(await field.inputValue(), "");
  await page.getByRole("button", { name: "Switch" }).tap();
  await enter(page, "Quill Assay");
  assert.equal(await field.inputValue(), "Well behind the malt store");
  await page.getByText("It was not sent yet").waitFor();

  // Left on purpose, it is gone: nothing old stands in a form opened anew.
  await page.goto("/sources");
  await page.goto("/sources/new");
  assert.equal(await field.inputValue(), "");
  await window.close();
});

test("a form sent after the session ended is there again after the PIN, and its key with it", async () => {
  const window = await tablet("Mill");
  const { page, context } = window;
  await page.goto("/sources/new");
  await enter(page, "Quill Assay");
  await page.getByLabel("Name", { exact: true }).fill("Rain on the roof");
  const key = await page.locator("main input[name=_key]").inputValue();
  await context.clearCookies({ name: "leat_session" });
  await page.locator("main form[method=post] button[type=submit]").first().tap();
  await page.getByRole("heading", { name: "Who is here?" }).waitFor();
  await enter(page, "Quill Assay");
  assert.equal(await page.getByLabel("Name", { exact: true }).inputValue(), "Rain on the roof");
  assert.equal(await page.locator("main input[name=_key]").inputValue(), key);
  await window.close();
});

test("no password and no PIN is kept on the tablet", async () => {
  const window = await tablet("Cellar");
  const { page } = window;
  await page.goto("/my-account");
  await enter(page, "Rush Mashman");
  await page.getByLabel("New PIN").fill("903412");
  await page.getByLabel("Present password").fill("a secret to look for");
  await page.getByRole("button", { name: "Switch" }).tap();
  await page.getByRole("heading", { name: "Who is here?" }).waitFor();
  const kept = await page.evaluate(() => JSON.stringify([{ ...sessionStorage }, { ...localStorage }]));
  assert.doesNotMatch(kept, /903412|a secret to look for/);
  await window.close();
});

test("without network it stays where it is, and goes back to the names with it", async () => {
  const window = await tablet("Yard");
  const { page, context, complaints } = window;
  await page.goto("/record");
  await enter(page, "Rush Mashman");
  await context.setOffline(true);
  await page.clock.runFor("06:00");
  await page.getByRole("heading", { level: 1, name: "Record book" }).waitFor();
  await context.setOffline(false);
  await page.clock.runFor("00:05");
  await page.getByRole("heading", { name: "Who is here?" }).waitFor();
  // Chromium says of each request without network that it failed.
  complaints.splice(0, complaints.length, ...complaints.filter((words) => !words.includes("ERR_INTERNET_DISCONNECTED")));
  await window.close();
});

for (const [colorScheme, width, height] of [["light", 1280, 800], ["dark", 800, 1280], ["light", 390, 844]]) {
  test(`names and keys are big enough and read well, ${colorScheme}, ${width} px wide`, async () => {
    const window = await tablet(`Tablet of ${width}`, { colorScheme, viewport: { width, height } });
    const { page } = window;
    const look = async (name) => {
      await page.evaluate(axe.source);
      const { violations } = await page.evaluate(() => globalThis.axe.run(document));
      assert.deepEqual(violations.map(({ id, nodes }) => `${id}: ${nodes[0].target}`), [], name);
      const small = await page.evaluate(() => [...document.querySelectorAll("main a, main button, main input:not([type=hidden]), header a, header button")]
        .filter((it) => it.getClientRects().length && it.getBoundingClientRect().height < 48).map((it) => it.outerHTML));
      assert.deepEqual(small, [], name);
      assert.ok((await page.evaluate(() => document.documentElement.scrollWidth)) <= width, name);
    };
    await look("names");
    for (const name of await page.locator("button.name").all()) assert.ok((await name.boundingBox()).height >= 72);
    await page.getByRole("button", { name: "Rush Mashman" }).tap();
    await page.getByLabel("PIN").waitFor();
    await look("PIN");
    await page.getByRole("link", { name: "Somebody else" }).tap();
    await enter(page, "Rush Mashman");
    await look("the start");
    await window.close();
  });
}
