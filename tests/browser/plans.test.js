// The desk: two people at one plan, an amount that answers at once, a server that does not, a plan on paper.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import { openWindow, signIn, startBrowser, startLeat } from "./leat.js";
import { approvedPlan, ask, draftedPlan, tokenOf } from "./api.js";
import { mashAcid, planIn } from "./pages.js";

let leat, browser, token, desk;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  desk = await openWindow(browser, leat);
  await signIn(desk.page, "manager");
  token = await tokenOf(desk.page);
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

for (const scripts of [true, false]) {
  test(`the second of two people who change one plan is told and keeps what was typed, ${scripts ? "with" : "without"} scripts`, async () => {
    const plan = await draftedPlan(leat, token);
    const [one, other] = [await openWindow(browser, leat, { javaScriptEnabled: scripts }), await openWindow(browser, leat, { javaScriptEnabled: scripts })];
    await signIn(one.page, "qa");
    await signIn(other.page, "brewer");
    await one.page.goto(plan);
    await other.page.goto(plan);
    await (await mashAcid(one.page)).fill("111");
    await one.page.getByRole("button", { name: "Save these amounts" }).click();
    await one.page.locator(".flash").waitFor();
    await (await mashAcid(other.page)).fill("222,5");
    await other.page.getByRole("button", { name: "Save these amounts" }).click();
    const told = await other.page.locator(".problem-summary").innerText();
    assert.match(told, /changed|meanwhile|since/i);
    assert.equal(await (await mashAcid(other.page)).inputValue(), "222,5", "what was typed stays to be read");
    const kept = await ask(leat, token, "GET", plan);
    assert.deepEqual(kept.doses.filter(({ name, vessel }) => vessel === "mash" && name.startsWith("Lactic")).map(({ planned }) => planned), [111]);
    await one.close();
    await other.close();
  });
}

test("an amount that makes no sense is told beside what is saved, and the answer comes back with the next one", async () => {
  const plan = await draftedPlan(leat, token);
  await desk.page.goto(plan);
  await (await mashAcid(desk.page)).fill("a splash");
  await desk.page.locator("#consequences .notice.danger").waitFor();
  await (await mashAcid(desk.page)).fill("150");
  await desk.page.locator("#consequences .notice.danger").waitFor({ state: "detached" });
  assert.ok(await (await mashAcid(desk.page)).evaluate((field) => field === document.activeElement), "the field keeps its focus");
});

test("a server that does not answer is said at once and forgotten when it does", async () => {
  const plan = await draftedPlan(leat, token);
  const window = await openWindow(browser, leat, { storageState: await desk.context.storageState() });
  const { page } = window;
  await page.goto(plan);
  await page.route("**/consequences", (route) => route.abort(), { times: 1 });
  await (await mashAcid(page)).fill("140");
  await page.locator("#consequences[data-stale]").waitFor();
  await (await mashAcid(page)).fill("141");
  await page.locator("#consequences:not([data-stale])").waitFor();
  window.complaints.length = 0; // Chromium’s own words about the lost answer.
  await window.close();
});

test("an approved plan shows nothing to move, and a change is the next revision", async () => {
  const plan = await approvedPlan(leat, token);
  await desk.page.goto(plan);
  assert.equal(await desk.page.locator("#treatment").count(), 0);
  await desk.page.getByRole("button", { name: "Begin the next revision" }).click();
  await desk.page.getByText("Revision 2").first().waitFor();
  assert.equal(await desk.page.locator("#treatment").count(), 1);
});

test("an API token is shown once, and not again", async () => {
  await desk.page.goto("/people");
  assert.equal(await desk.page.locator("#token-secret").count(), 0);
  await ask(leat, token, "GET", "/plans");
});

// The part of a sheet between margins of 14 mm, at 96 px to the inch.
const SHEETS = { A4: Math.floor(((210 - 28) / 25.4) * 96), Letter: Math.floor(8.5 * 96 - (28 / 25.4) * 96) };

for (const [format, width] of Object.entries(SHEETS)) {
  test(`a plan prints on ${format}: no navigation, no buttons, nothing cut off`, async () => {
    const window = await openWindow(browser, leat, { storageState: await desk.context.storageState(), viewport: { width, height: 1000 } });
    const { page } = window;
    for (const state of ["draft", "approved", "closed"]) {
      await page.emulateMedia({ media: null });
      await page.goto(await planIn(page, { state }));
      await page.emulateMedia({ media: "print" });
      for (const part of [".rail", ".menu", ".person", "button", ".back", ".demo-banner"]) {
        assert.equal(await page.locator(part).filter({ visible: true }).count(), 0, `${part} of a ${state} plan stays on the screen`);
      }
      const wide = await page.evaluate((sheet) => [...document.querySelectorAll("main *")]
        .filter((part) => part.checkVisibility() && part.getBoundingClientRect().right > sheet + 1)
        .map((part) => `${part.tagName}.${part.className}`), width);
      assert.deepEqual(wide, [], `a ${state} plan fits the width`);
      const sheets = (await page.pdf({ format, preferCSSPageSize: false })).toString("latin1").match(/\/Type\s*\/Page\b/g).length;
      assert.ok(sheets <= (state === "closed" ? 4 : 3), `a ${state} plan takes ${sheets} sheets`);
    }
    await window.close();
  });
}

test("no page of the desk complained", () => desk.close());
