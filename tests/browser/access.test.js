// Everybody can read every page and hit everything on it: by other means than eyes, in light and dark, in wet gloves.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import axe from "axe-core";
import { approvedPlan, tokenOf } from "./api.js";
import { openWindow, signIn, startBrowser, startLeat } from "./leat.js";
import { mainPages, planIn } from "./pages.js";

const PIN = "719402";

let leat, browser, storageState, pages, bench, names;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  const desk = await openWindow(browser, leat);
  const { page } = desk;
  await signIn(page, "manager");
  pages = await mainPages(page);
  const token = await tokenOf(page);
  const approved = await approvedPlan(leat, token);
  const dosed = await planIn(page, { state: "dosed" });
  const check = pages.find(({ name }) => name === "mash-check").address;
  bench = ["/", `${approved}/weigh-out`, `${dosed}/weigh-out`, `${dosed}/mash-checks/new`, check, `${dosed}/closing`]
    .concat(pages.filter(({ name }) => name.startsWith("calibrate")).map(({ address }) => address));
  storageState = await desk.context.storageState();
  await page.goto("/people");
  await page.getByRole("link", { name: "Quill Assay" }).first().click();
  await page.getByLabel("New PIN").fill(PIN);
  await page.getByRole("button", { name: "Set the PIN" }).click();
  await page.getByText("The PIN is set").waitFor();
  await desk.close();
  // A shared tablet, showing the names.
  const tablet = await openWindow(browser, leat);
  tablet.page.on("dialog", (dialog) => dialog.accept());
  await signIn(tablet.page, "manager");
  await tablet.page.goto("/tablets");
  await tablet.page.getByLabel("What to call it").fill("Mash tun");
  await tablet.page.getByRole("button", { name: "Enrol this device" }).click();
  await tablet.page.getByRole("heading", { name: "Who is here?" }).waitFor();
  names = await tablet.context.storageState();
  await tablet.close();
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

/** Opens what is folded, so that it is judged as well. */
async function unfold(page) {
  await page.evaluate(() => document.querySelectorAll("main details").forEach((part) => { part.open = true; }));
}

async function violations(page) {
  await unfold(page);
  await page.evaluate(axe.source);
  const { violations: found } = await page.evaluate(() => globalThis.axe.run(document, { resultTypes: ["violations"] }));
  return found.flatMap(({ id, nodes }) => nodes.map(({ target, failureSummary }) => `${id}: ${target.join(" ")}: ${failureSummary.split("\n").slice(1, 3).join(" ").trim()}`));
}

/** Everything that is touched and smaller than a gloved finger. */
async function small(page) {
  await unfold(page);
  return page.evaluate(() => {
    const found = [];
    for (const thing of document.querySelectorAll("a, button, summary, input:not([type=hidden]), select, textarea")) {
      if (thing.closest(".skip, .foot") || !thing.checkVisibility()) continue;
      // A box to tick is touched by its label.
      const touched = thing.matches("[type=checkbox], [type=radio]") ? thing.closest("label") ?? thing : thing;
      const { width, height } = touched.getBoundingClientRect();
      if (Math.min(width, height) < 47.9) found.push(`${thing.tagName} “${(thing.innerText || thing.name || "").trim()}” ${Math.round(width)} × ${Math.round(height)}`);
    }
    return found;
  });
}

for (const [colorScheme, width, height] of [["light", 1280, 800], ["dark", 1280, 800], ["light", 390, 844], ["dark", 800, 1280]]) {
  test(`no page has a fault for those who read by other means, ${colorScheme}, ${width} px wide`, async () => {
    const window = await openWindow(browser, leat, { storageState, colorScheme, viewport: { width, height } });
    const faults = [];
    for (const { name, address } of pages) {
      // The reader of the API is somebody else’s work, shown as it comes.
      if (name === "help-api") continue;
      await window.page.goto(address);
      faults.push(...(await violations(window.page)).map((fault) => `${name}: ${fault}`));
    }
    assert.deepEqual(faults, []);
    await window.close();
  });
}

for (const colorScheme of ["light", "dark"]) {
  test(`no fault on the pages to sign in, ${colorScheme}`, async () => {
    for (const storage of [undefined, names]) {
      const window = await openWindow(browser, leat, { colorScheme, storageState: storage });
      await window.page.goto("/sign-in");
      assert.deepEqual(await violations(window.page), []);
      if (storage) {
        await window.page.getByRole("button", { name: "Quill Assay" }).click();
        await window.page.getByLabel("PIN").waitFor();
        assert.deepEqual(await violations(window.page), [], "PIN");
      }
      await window.close();
    }
  });
}

for (const [width, height] of [[1280, 800], [800, 1280], [390, 844]]) {
  test(`everything to touch on the tablet’s pages is 48 px or more, ${width} px wide`, async () => {
    const window = await openWindow(browser, leat, { storageState, viewport: { width, height } });
    const found = [];
    for (const address of bench) {
      await window.page.goto(address);
      found.push(...(await small(window.page)).map((thing) => `${address}: ${thing}`));
    }
    assert.deepEqual(found, []);
    await window.close();
  });

  test(`everything to touch to sign in is 48 px or more, ${width} px wide`, async () => {
    const password = await openWindow(browser, leat, { viewport: { width, height } });
    await password.page.goto("/sign-in");
    assert.deepEqual(await small(password.page), []);
    await password.close();
    const tablet = await openWindow(browser, leat, { storageState: names, viewport: { width, height } });
    await tablet.page.goto("/sign-in");
    assert.deepEqual(await small(tablet.page), [], "the names");
    await tablet.page.getByRole("button", { name: "Quill Assay" }).click();
    await tablet.page.getByLabel("PIN").waitFor();
    assert.deepEqual(await small(tablet.page), [], "the PIN");
    await tablet.close();
  });
}
