// The tablet by the mash tun: a tick is never lost and never doubled, a keyboard is enough, gloves hit the buttons.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import { openWindow, PASSWORD, signIn, startBrowser, startLeat } from "./leat.js";
import { approvedPlan, tokenOf } from "./api.js";

let leat, browser, token, manager;
before(async () => {
  leat = await startLeat({ demo: true });
  browser = await startBrowser();
  manager = await openWindow(browser, leat);
  await signIn(manager.page, "manager");
  token = await tokenOf(manager.page);
});
after(async () => {
  await browser?.close();
  await leat?.stop();
});

const line = (page) => page.locator("section.line:not([hidden])");
const button = (page) => line(page).getByRole("button", { name: /^As planned/ });
const typed = (page) => line(page).getByRole("button", { name: /It is in the/ });
const scale = (page) => line(page).getByLabel("What the scale showed");
/** Until the server has what was ticked; a script sends it after the next line is shown. */
const saved = (page) => page.locator("li.done[data-line-state]:not([data-state=waiting])").first().waitFor();
const way = (page) => page.locator(".steps-words").innerText();
/** What the plan’s own page says was weighed in, line by line. */
async function weighedIn(page, plan) {
  await page.goto(plan);
  return page.locator("section", { hasText: "Weigh-out" }).locator("tbody tr").evaluateAll((rows) => rows.map((row) => row.cells[4].textContent.trim()));
}

for (const scripts of [true, false]) {
  const how = scripts ? "with scripts" : "without scripts";

  test(`a double click weighs one line in, once, ${how}`, async () => {
    const plan = await approvedPlan(leat, token);
    const window = await openWindow(browser, leat, { javaScriptEnabled: scripts });
    const { page } = window;
    await signIn(page, "brewer");
    await page.goto(`${plan}/weigh-out`);
    await button(page).dblclick();
    await page.locator(".steps-words", { hasText: "Line 2" }).waitFor();
    await saved(page);
    const weighed = await weighedIn(page, plan);
    assert.notEqual(weighed[0], "");
    assert.deepEqual(weighed.slice(1).filter(Boolean), [], "only the first line is in");
    await window.close();
  });

  test(`going back shows where the weigh-out stands and doubles nothing, ${how}`, async () => {
    const plan = await approvedPlan(leat, token);
    const window = await openWindow(browser, leat, { javaScriptEnabled: scripts });
    const { page } = window;
    await signIn(page, "brewer");
    await page.goto(`${plan}/weigh-out`);
    await button(page).click();
    await page.locator(".steps-words", { hasText: "Line 2" }).waitFor();
    await saved(page);
    // Where a script shows the next line nothing was left behind: reloading is what is tried there.
    await (scripts ? page.reload() : page.goBack());
    assert.match(await way(page), /Line 2/, "the line that is in is not offered again");
    assert.equal((await weighedIn(page, plan)).filter(Boolean).length, 1);
    await window.close();
  });

  test(`a second tablet that still shows a line weighed on the first changes nothing, ${how}`, async () => {
    const plan = await approvedPlan(leat, token);
    const window = await openWindow(browser, leat, { javaScriptEnabled: scripts });
    const first = window.page;
    await signIn(first, "brewer");
    // A tablet of its own: two pages on one share what they have ticked.
    const tablet = await openWindow(browser, leat, { javaScriptEnabled: scripts });
    const second = tablet.page;
    await signIn(second, "qa");
    await second.goto(`${plan}/weigh-out`);
    await first.goto(`${plan}/weigh-out`);
    await button(first).click();
    await first.locator(".steps-words", { hasText: "Line 2" }).waitFor();
    await saved(first);
    const [once] = await weighedIn(first, plan);
    await scale(second).fill("999");
    await typed(second).click();
    await second.locator(".problem-summary", { hasText: /in already|weighed/ }).waitFor();
    if (!scripts) assert.equal(await scale(second).inputValue(), "", "nothing is typed into the next line");
    const weighed = await weighedIn(first, plan);
    assert.equal(weighed[0], once);
    assert.deepEqual(weighed.slice(1).filter(Boolean), [], "no other line took the amount");
    await tablet.close();
    await window.close();
  });
}

test("a tick whose answer was lost on the way is in once when it is sent again", async () => {
  const plan = await approvedPlan(leat, token);
  const window = await openWindow(browser, leat);
  const { page } = window;
  await signIn(page, "brewer");
  await page.goto(`${plan}/weigh-out`);
  // The server hears the request; the brewer never sees its answer.
  await page.route("**/doses/*", async (route) => {
    await route.fetch({ maxRedirects: 0 });
    await route.abort();
  }, { times: 1 });
  await button(page).click();
  await page.locator(".steps-words", { hasText: "Line 2" }).waitFor();
  await saved(page);
  await page.goto(`${plan}/weigh-out`);
  assert.match(await way(page), /Line 2/, "the line is in although nobody saw it go");
  const weighed = await weighedIn(page, plan);
  assert.equal(weighed.filter(Boolean).length, 1);
  window.complaints.length = 0; // Chromium’s own words about the lost answer.
  await window.close();
});

test("a refused weight comes back as typed with a sentence beside it", async () => {
  const plan = await approvedPlan(leat, token);
  const window = await openWindow(browser, leat);
  const { page } = window;
  await signIn(page, "brewer");
  await page.goto(`${plan}/weigh-out`);
  const lot = line(page).locator("[name=lot]");
  await scale(page).fill("about a cup");
  await lot.fill("X-9");
  await typed(page).click();
  await line(page).locator(".problem-summary").waitFor();
  assert.equal(await scale(page).inputValue(), "about a cup");
  assert.equal(await lot.inputValue(), "X-9");
  assert.match(await way(page), /Line 1/);
  await window.close();
});

test("a keyboard alone signs in and weighs out", async () => {
  const plan = await approvedPlan(leat, token);
  const window = await openWindow(browser, leat);
  const { page } = window;
  const tabTo = async (selector) => {
    for (let tabs = 0; tabs < 60; tabs += 1) {
      await page.keyboard.press("Tab");
      if (await page.evaluate((wanted) => document.activeElement?.matches(wanted), selector)) return;
    }
    assert.fail(`no Tab reaches ${selector}`);
  };
  await page.goto(`/sign-in?next=${encodeURIComponent(`${plan}/weigh-out`)}`);
  await tabTo("#field-login");
  await page.keyboard.type("brewer");
  await tabTo("#field-password");
  await page.keyboard.type(PASSWORD);
  await page.keyboard.press("Enter");
  await line(page).locator(".weigh").waitFor();
  const lines = Number((await way(page)).match(/of (\d+)/)[1]);
  for (let number = 1; number <= lines; number += 1) {
    await page.locator(".steps-words", { hasText: `Line ${number} of` }).waitFor();
    // A second tap right after the first is not taken for one on the next line.
    await line(page).locator("button:not([disabled])").first().waitFor();
    await tabTo("section.line:not([hidden]) [name=actual]");
    const outline = await page.evaluate(() => getComputedStyle(document.activeElement).outlineStyle);
    assert.equal(outline, "solid", "the focus can be seen");
    await page.keyboard.type(await line(page).locator(".weigh-amount .value").innerText());
    await page.keyboard.press("Enter");
  }
  await page.getByText("Everything planned is in.").waitFor();
  await window.close();
});

test("an amount far from the plan is taken only with a reason, after its effect was shown", async () => {
  const plan = await approvedPlan(leat, token);
  const window = await openWindow(browser, leat);
  const { page } = window;
  await signIn(page, "brewer");
  await page.goto(`${plan}/weigh-out`);
  const planned = await line(page).locator(".weigh-amount .value").innerText();
  await scale(page).fill(`${planned}0`);
  await typed(page).click();
  await line(page).locator(".asked").waitFor();
  assert.match(await line(page).locator(".asked").innerText(), /900 % more than [^;]*planned[\s\S]*Mash pH/);
  await line(page).getByLabel("Why").fill("The sack slipped.");
  await typed(page).click();
  await page.locator(".steps-words", { hasText: "Line 2" }).waitFor();
  await saved(page);
  await window.close();
});

test("on paper every line of the weigh-out stands on one sheet, A4 or Letter", async () => {
  const plan = await approvedPlan(leat, token);
  const { page } = manager;
  await page.goto(`${plan}/weigh-out`);
  const lines = await page.locator("li[data-line-state]").count();
  await page.emulateMedia({ media: "print" });
  const rows = await page.locator(".paper tbody tr").evaluateAll((all) => all.filter((row) => row.checkVisibility()).map((row) => row.getBoundingClientRect().height));
  assert.equal(rows.length, lines, "every line is on the sheet");
  assert.ok(Math.min(...rows) > 40, "with room to write, 11 mm and more");
  assert.ok(await page.getByText(/approved by/).isVisible());
  await page.emulateMedia({ media: null });
  for (const format of ["A4", "Letter"]) {
    const sheet = (await page.pdf({ format })).toString("latin1");
    assert.equal(sheet.match(/\/Type\s*\/Page\b/g).length, 1, format);
  }
});
