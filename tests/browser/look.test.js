// Every main page, as the invented brewery fills it: readable by everybody, at every size, from this server alone.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import axe from "axe-core";
import { openWindow, signIn, startBrowser, startLeat } from "./leat.js";
import { mainPages } from "./pages.js";

let leat, browser, storageState, pages;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  const desk = await openWindow(browser, leat);
  await signIn(desk.page, "manager");
  pages = await mainPages(desk.page);
  storageState = await desk.context.storageState();
  await desk.close();
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

async function violations(page) {
  await page.evaluate(() => document.querySelectorAll("main details").forEach((part) => { part.open = true; }));
  await page.evaluate(axe.source);
  const { violations: found } = await page.evaluate(() => globalThis.axe.run(document, { resultTypes: ["violations"] }));
  return found
    .filter(({ impact }) => impact === "serious" || impact === "critical")
    .flatMap(({ id, nodes }) => nodes.map(({ target, failureSummary }) => `${id}: ${target.join(" ")}: ${failureSummary.split("\n").slice(1, 3).join(" ").trim()}`));
}

for (const [colorScheme, width, height] of [["light", 1280, 800], ["dark", 1280, 800], ["light", 390, 844]]) {
  test(`no serious fault for those who read by other means, ${colorScheme}, ${width} px wide`, async () => {
    const window = await openWindow(browser, leat, { storageState, colorScheme, viewport: { width, height } });
    for (const { name, address } of pages) {
      // The reader of the API is somebody else’s work, shown as it comes.
      if (name === "help-api") continue;
      await window.page.goto(address);
      assert.deepEqual(await violations(window.page), [], name);
    }
    await window.close();
  });
}

test("no serious fault on the page to sign in", async () => {
  const window = await openWindow(browser, leat);
  await window.page.goto("/sign-in");
  assert.deepEqual(await violations(window.page), []);
  await window.close();
});

for (const width of [390, 800, 1280]) {
  test(`no page scrolls sideways at ${width} px`, async () => {
    const window = await openWindow(browser, leat, { storageState, viewport: { width, height: 900 } });
    for (const { name, address } of pages) {
      await window.page.goto(address);
      await window.page.evaluate(() => document.querySelectorAll("main details").forEach((part) => { part.open = true; }));
      const wide = await window.page.evaluate(() => document.documentElement.scrollWidth);
      assert.ok(wide <= width, `${name} is ${wide} px wide`);
    }
    await window.close();
  });
}

test("every page says in its title and in one heading what it is", async () => {
  const window = await openWindow(browser, leat, { storageState });
  const titles = new Map();
  for (const { name, address } of pages) {
    await window.page.goto(address);
    assert.equal(await window.page.locator("h1:not(#api-reader h1)").filter({ visible: true }).count(), 1, name);
    const title = await window.page.title();
    assert.match(title, / · Sedge and Sluice Brewery$/, name);
    titles.set(title, [...(titles.get(title) ?? []), name]);
  }
  const shared = [...titles.values()].filter((names) => names.length > 1 && !names.every((name) => name.startsWith("plan-") || name.startsWith("weigh")));
  assert.deepEqual(shared, [], "pages can be told apart by their titles");
  await window.close();
});

test("the API can be read with this server alone", async () => {
  const window = await openWindow(browser, leat, { storageState });
  await window.page.goto("/help/api");
  await window.page.locator("#api-reader .opblock").first().waitFor();
  assert.ok((await window.page.locator("#api-reader .opblock").count()) > 20, "its calls are listed");
  await window.close();
});
