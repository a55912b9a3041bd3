// Other systems of the brewery: a token made on the page of the people, and what it opens.

import assert from "node:assert/strict";

/** Makes a token that may do everything, on the page for it. */
export async function tokenOf(page) {
  await page.goto("/people");
  const form = page.locator("form[action='/tokens']");
  await form.getByLabel("What uses it").fill(`Batch sheets ${Date.now()}`);
  for (const box of await form.getByRole("checkbox").all()) await box.check();
  await form.getByLabel("Good for").fill("7");
  await form.getByRole("button", { name: "Make the token" }).click();
  return page.locator("#token-secret").innerText();
}

/** Asks the API; anything but the wanted status is a failure. */
export async function ask(leat, token, method, address, body, status = 200) {
  const answer = await fetch(`${leat.address}/api/v1${address}`, {
    method,
    headers: { authorization: `Bearer ${token}`, "content-type": "application/json" },
    body: body === undefined ? undefined : JSON.stringify(body),
  });
  const text = await answer.text();
  assert.equal(answer.status, status, `${method} ${address}: ${text.slice(0, 400)}`);
  return text ? JSON.parse(text) : undefined;
}

let batches = 0;

/** Drafts a plan of the invented brewery’s first beer and gives its address. */
export async function draftedPlan(leat, token) {
  const { items: beers } = await ask(leat, token, "GET", "/beers");
  batches += 1;
  const day = new Date().toISOString().slice(0, 10);
  const body = { batch: `T-${batches}`, beer_id: beers.find(({ name }) => name === "Sluice Pale").id, brewed_on: day, way: "closest_to_preferred" };
  return `/plans/${(await ask(leat, token, "POST", "/plans", body, 201)).id}`;
}

/** The same, approved. */
export async function approvedPlan(leat, token) {
  const plan = await draftedPlan(leat, token);
  await ask(leat, token, "POST", `${plan}/approval`, {}, 201);
  return plan;
}

/** A meter calibrated just now, as its own display tells it, in fresh buffers 7 and 4. */
export async function calibratedMeter(leat, token) {
  const { id } = await ask(leat, token, "POST", "/meters", { name: `Bench meter ${Date.now()}`, kind: "bench", compensated: true, in_use: true }, 201);
  const calibration = {
    calibrated_at: "", method: "display", temperature_c: 20, slope: 97, offset_mv: 5,
    buffers: [{ buffer: "technical_7" }, { buffer: "technical_4" }],
  };
  await ask(leat, token, "POST", `/meters/${id}/calibrations`, calibration, 201);
  return id;
}
