// The weigh-out by taps: a tick is kept on this device first (ticks.js), the next line is shown at once, and the tick is
// sent when the network allows (sender.js). What may be accepted, the server says; here it is only carried and shown.
//
//   <form data-queued>               a tap keeps it here and sends it
//   <section data-line="{dose}">     one line with its form; those still to do are all on the page, one is shown.
//       data-words, data-step-words  what the queue calls it, and where it stands ("Line 2 of 5")
//       data-planned, data-tolerance in the unit of the field: outside, the line stays until the server has answered
//   <li data-line-state="{dose}">    says waiting, saved or not accepted
//   A form in a line without data-queued needs a second person: it is sent, never kept, because no PIN is stored.
import { describe, problem, states, tell, toBeSeen, waits } from "./notices.js";
import { post, send, start, trouble } from "./sender.js";
import * as ticks from "./ticks.js";

/** A second tap within this time was meant for the line before, ms. */
const QUIET_MS = 700;
/** How long the server is waited for before a line outside its tolerance gives way to the next, ms. */
const HELD_MS = 4000;

const { member = "", memberName = "", kept } = document.body.dataset;
/** When this page was made, on this device's clock: what was saved before, it knows. */
const pageMade = kept ? Date.parse(kept) : performance.timeOrigin + (performance.getEntriesByType("navigation")[0]?.requestStart ?? 0);

let list = [];
let quietUntil = 0;
let busy = false;
let left = false;
/** Lines saved without the queue, since this page was made. */
const savedHere = new Set();

const lines = () => [...document.querySelectorAll("[data-line]")];
const lineOf = (id) => document.querySelector(`[data-line="${CSS.escape(id)}"]`);
/** The form of a line; a queued form that is no line is its own. */
const formOf = (place) => (place.matches("form") ? place : place.querySelector("form[method=post]"));
const shown = () => lines().find((line) => !line.hidden);
const path = (url) => new URL(url, location.href).pathname;

/** The tick of a form, if this page does not know yet what came of it. */
function tickOf(url) {
  return list.find((tick) => tick.url === path(url) && (tick.state !== "saved" || tick.at > pageMade));
}

/** "", "waiting", "saved" or "refused". */
function stateOf(line) {
  if (savedHere.has(line.dataset.line)) return "saved";
  const form = formOf(line);
  return (form && tickOf(form.action)?.state) || "";
}

const toDo = (line) => ["", "refused"].includes(stateOf(line));

// A tap.

document.addEventListener("submit", (event) => {
  const form = event.target;
  const line = form.closest("[data-line]");
  if (event.defaultPrevented || !(form.hasAttribute("data-queued") || line)) return;
  event.preventDefault();
  event.stopPropagation();
  if (busy || performance.now() < quietUntil) return;
  busy = true;
  tapped(form, line, event.submitter).finally(() => { busy = false; });
}, true);

async function tapped(form, line, submitter) {
  const data = new FormData(form);
  if (submitter?.name) data.append(submitter.name, submitter.value);
  const tick = {
    key: String(data.get("_key") ?? ""), url: path(form.action), body: new URLSearchParams(data).toString(),
    member, memberName, page: location.pathname, line: line?.dataset.line ?? "", words: describe(form, line), made: Date.now(),
  };
  if (!form.hasAttribute("data-queued")) return straight(tick, line);
  const question = line && outside(line, data) ? answered(tick) : null;
  try {
    await ticks.add(tick);
  } catch {
    // No IndexedDB here: the form goes as if there were no script.
    HTMLFormElement.prototype.submit.call(form);
    return;
  }
  send();
  if (question) { rest(line, true); await question; rest(line, false); }
  await refresh(true);
}

/** Whether the amount is one the server will ask about. The rule is the server's; this only spares a step forth and back. */
function outside(line, data) {
  const { planned, tolerance } = line.dataset;
  const actual = Number(String(data.get("actual") ?? "").trim().replace(",", "."));
  return Boolean(planned && tolerance) && !data.get("reason") && !data.get("as_planned") && !(Math.abs(actual - Number(planned)) <= Number(tolerance));
}

/** Resolves when something came of the tick, or when that takes too long. */
function answered(tick) {
  return new Promise((done) => {
    setTimeout(done, HELD_MS);
    const ended = ticks.onChange(async () => {
      const found = (await ticks.all()).find(({ key }) => key === tick.key);
      if (found && found.state !== "waiting") { ended(); done(); }
    });
  });
}

/** Sends without keeping: a line that needs a second person. */
async function straight(tick, line) {
  rest(line, true);
  const answer = await post(tick);
  rest(line, false);
  if (answer.trouble === "sign-in") { location.assign(`/sign-in?next=${encodeURIComponent(location.pathname)}`); return; }
  if (answer.trouble) {
    problem(line, "This line waits for the network", ["It needs a second person, so it is not kept on this tablet. Nothing was weighed in; tick it again when the network is back, or weigh another line first."]);
    return;
  }
  if (answer.state === "saved") { savedHere.add(tick.line); await refresh(true, answer.next); return; }
  await refuse(line, { ...tick, ...answer });
}

function rest(line, resting) {
  for (const button of line?.querySelectorAll("button") ?? []) button.disabled = resting;
}

// What the page shows.

/** Reads what is kept and shows it; after a tap the next line is shown in any case. */
async function refresh(tap = false, next = "") {
  try { list = await ticks.all(); } catch { list = []; }
  for (const line of lines()) {
    const form = formOf(line);
    const tick = form && tickOf(form.action);
    if (tick?.state === "refused") await refuse(line, tick);
  }
  arrange(tap);
  alone();
  tell(list, { member, trouble, weighing: lines().length > 0, left: lines().some(toDo), act });
  leave(next);
}

function arrange(tap) {
  const now = shown();
  if (!now && !lines().length) return;
  const stays = now && toDo(now) && !tap;
  const back = lines().find((line) => stateOf(line) === "refused");
  const after = now ? lines().slice(lines().indexOf(now) + 1) : [];
  const next = [...after, ...lines()].find(toDo);
  if (stays && back && back !== now && untouched(now)) show(back);
  else if (!stays) show(back ?? next);
  else show(now, false);
}

function untouched(line) {
  if (line.contains(document.activeElement) && document.activeElement.matches("input, select, textarea")) return false;
  return [...(formOf(line)?.elements ?? [])].every((field) => {
    if (field.matches("select")) return [...field.options].every((option) => option.selected === option.defaultSelected || field.selectedIndex === 0);
    if (field.matches("[type=checkbox], [type=radio]")) return field.checked === field.defaultChecked;
    return field.defaultValue === undefined || field.value === field.defaultValue;
  });
}

/** Shows one line, or that there is none left. */
function show(line, moved = true) {
  const was = shown();
  for (const other of lines()) other.hidden = other !== line;
  document.querySelector("main")?.classList.toggle("all-ticked", !line);
  for (const words of document.querySelectorAll(".steps-words")) {
    if (!line) words.textContent = "Every line is ticked";
    else if (line.dataset.stepWords) words.textContent = line.dataset.stepWords;
  }
  states(lines().map((each) => ({ id: each.dataset.line, state: stateOf(each), now: each === line })));
  if (!moved || !line || line === was) return;
  quietUntil = performance.now() + QUIET_MS;
  rest(line, true);
  setTimeout(() => rest(line, false), QUIET_MS);
  line.tabIndex = -1;
  (line.querySelector(".problem-summary") ?? line).focus({ preventScroll: true });
  window.scrollTo(0, 0);
}

/** A queued form that is no line, such as the first step of a reading: it rests while it waits, then the server's page follows. */
function alone() {
  for (const form of document.querySelectorAll("form[data-queued]")) {
    if (form.closest("[data-line]")) continue;
    const tick = tickOf(form.action);
    for (const button of form.querySelectorAll("button")) button.disabled = tick?.state === "waiting" || tick?.state === "saved";
    if (tick?.state === "waiting") waits(form, tick);
    // The question has a page of its own; there is a network, for the server has just answered.
    if (tick?.state === "refused" && tick.status === 422 && new FormData(form).get("_key") === tick.key) ticks.forget(tick.id, ({ state }) => state === "refused").then(() => HTMLFormElement.prototype.submit.call(form));
    else if (tick?.state === "refused") refuse(form, tick);
    if (tick?.state === "saved") leave(tick.next ?? location.pathname, true);
  }
}

/** When everything is saved, the page that follows is the server's. */
function leave(next, now = false) {
  const all = lines();
  const done = all.length > 0 && all.every((line) => stateOf(line) === "saved");
  if (left || !(now || done)) return;
  left = true;
  const last = list.filter(({ state, page }) => state === "saved" && page === location.pathname).sort((a, b) => a.at - b.at).pop();
  location.assign(next || last?.next || location.pathname);
}

// A refusal.

/** Brings a line back with what the server says about it and with what was typed. */
async function refuse(line, tick) {
  if (line.dataset.refused === tick.key) return;
  line.dataset.refused = tick.key;
  const typed = new URLSearchParams(tick.body);
  for (const field of formOf(line)?.elements ?? []) {
    if (!field.name || field.name.startsWith("_") || !typed.has(field.name)) continue;
    if (field.matches("[type=checkbox], [type=radio]")) field.checked = typed.getAll(field.name).includes(field.value);
    else field.value = typed.get(field.name);
  }
  const asked = tick.status === 422 && !tick.fields.some(({ pointer }) => pointer.startsWith("/second_person")) ? await question(tick) : null;
  if (asked) {
    asked.dataset.refused = tick.key;
    asked.hidden = line.hidden;
    line.replaceWith(asked);
    return;
  }
  const sentences = tick.fields.length ? tick.fields.map(({ detail }) => detail) : [tick.sentence];
  const box = problem(line, "This was not saved", sentences, tick.fields);
  if (tick.status !== 422) toBeSeen(box, () => act("seen", tick));
}

/** The line as the server shows it again, with its question and what the amount would do. */
async function question({ url, body, member: madeBy, line }) {
  try {
    const answer = await fetch(url, { method: "POST", body: new URLSearchParams(body), redirect: "manual", headers: { Accept: "text/html", "X-Leat-Member": madeBy } });
    if (answer.status !== 422) return null;
    const page = new DOMParser().parseFromString(await answer.text(), "text/html");
    return document.adoptNode(page.querySelector(`[data-line="${CSS.escape(line)}"]`));
  } catch {
    return null;
  }
}

/** What somebody does about a tick: "withdraw" one that was never sent, or "seen" of a refusal. */
async function act(what, tick) {
  if (what === "withdraw") await ticks.forget(tick.id, ({ state, tried }) => state === "waiting" && !tried);
  if (what === "seen") {
    if (tick.id) await ticks.forget(tick.id, ({ state }) => state === "refused");
    if (lines().length && trouble === "") location.assign(location.pathname);
  }
}

document.addEventListener("click", (event) => {
  const link = event.target.closest?.("a[href*='dose=']");
  if (!link || event.ctrlKey || event.metaKey || event.shiftKey) return;
  const line = lineOf(new URL(link.href).searchParams.get("dose") ?? "");
  if (!line || !toDo(line)) return;
  event.preventDefault();
  show(line);
});

window.addEventListener("pageshow", (event) => { if (event.persisted) { busy = false; left = false; refresh(); } });
ticks.onChange(() => { if (!busy) refresh(); });
start(member, () => refresh());
refresh();
ticks.tidy().catch(() => { /* without IndexedDB there is nothing to tidy */ });
