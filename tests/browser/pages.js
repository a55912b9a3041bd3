// The main pages of the invented brewery, found by following its links.

async function first(page, list, link, where = "main") {
  await page.goto(list);
  const found = page.locator(where).locator(`a[href^="${link}"]`).first();
  return found.getAttribute("href");
}

/** The page of the plan in this state, or with this batch number. */
export async function planIn(page, { state = "", batch = "" }) {
  await page.goto(`/plans?state=${state}&batch=${batch}`);
  return page.locator("tbody tr th a").first().getAttribute("href");
}

/** Names and addresses, as a manager sees them. */
export async function mainPages(page) {
  const draft = await planIn(page, { state: "draft" });
  const approved = await planIn(page, { state: "approved" });
  const dosed = await planIn(page, { state: "dosed" });
  const closed = await planIn(page, { state: "closed" });
  const source = await first(page, "/sources", "/sources/", "tbody");
  const test = await first(page, source, "/water-tests/", "tbody");
  const material = await first(page, "/shelf", "/shelf/", "tbody");
  const malt = await first(page, "/malts", "/malts/", "tbody");
  const meter = await first(page, "/meters", "/meters/", "tbody");
  const calibration = await first(page, meter, `${meter}/calibrations/`, "tbody");
  const beer = await first(page, "/beers", "/beers/", "tbody");
  const check = await first(page, closed, `${closed}/mash-checks/`);
  return Object.entries({
    "brew-day": "/", "plans": "/plans", "plan-new": "/plans/new", "plan-draft": draft, "plan-approved": approved,
    "plan-dosed": dosed, "plan-closed": closed, "weigh-out": `${approved}/weigh-out`, "weighed-out": `${dosed}/weigh-out`,
    "mash-read": `${dosed}/mash-checks/new`, "mash-check": check, "closing": `${dosed}/closing`,
    "beers": "/beers", "beer": beer, "beer-new": "/beers/new", "beer-edit": `${beer}/edit`,
    "sources": "/sources", "source": source, "source-new": "/sources/new", "test": test, "test-new": `${source}/water-tests/new`,
    "shelf": "/shelf", "material": material, "material-new": "/shelf/new", "material-edit": `${material}/edit`,
    "malts": "/malts", "malt": malt, "malt-new": "/malts/new", "meters": "/meters", "meter": meter, "meter-new": "/meters/new", "calibration": calibration,
    "calibrate-mv": `${meter}/calibrations/new?method=millivolts`, "calibrate-ph": `${meter}/calibrations/new?method=ph`,
    "calibrate-display": `${meter}/calibrations/new?method=display`, "record": "/record", "people": "/people", "person-new": "/people/new", "person-invited": "/people/invite", "account": "/my-account", "tablets": "/tablets",
    "settings": "/settings", "help": "/help", "help-api": "/help/api",
  }).map(([name, address]) => ({ name, address }));
}

/** The field for lactic acid in the mash of a draft; unfolded where the plan has none yet. */
export async function mashAcid(page) {
  const group = page.locator("fieldset", { hasText: "Into the mash" });
  const field = group.getByLabel("Lactic acid");
  if (!(await field.isVisible())) await group.locator("summary").click();
  return field;
}
