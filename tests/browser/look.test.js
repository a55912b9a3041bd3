// Every main page, as the invented brewery fills it: at every size, told apart, from this server alone.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
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
