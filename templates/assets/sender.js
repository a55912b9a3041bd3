// Sends the ticks of one person, in the order they were made, until the server has answered each.
//
// An answer is only what Leat itself says: {"state": "saved"}, or a problem as application/problem+json. Anything else
// (no network, a proxy's page, a server that is starting) means: try again later, with the same key.
import * as ticks from "./ticks.js";

const PATIENCE_MS = 15_000;
const LEASE_MS = 20_000;
const LONGEST_PAUSE_MS = 30_000;
/** Refusals that pass by themselves. */
const PASSING = [401, 408, 425, 429];
/** This tab; the same after a reload, so that it need not wait for its own lease to end. */
const me = tab();

/** What stands in the way: "" (nothing), "network", "server", "sign-in". */
export let trouble = navigator.onLine === false ? "network" : "";
/** Whose ticks are sent. */
let member = "";
let told = () => {};
let running = false;
let again = false;
let pauses = 0;
let timer;

function tab() {
  const fresh = `${Date.now()}-${Math.random()}`;
  try {
    const known = sessionStorage.getItem("leat-tab") ?? fresh;
    sessionStorage.setItem("leat-tab", known);
    return known;
  } catch {
    return fresh;
  }
}

function now(what) {
  if (what === trouble) return;
  trouble = what;
  told();
}

/** Begins to send the ticks of this member; `onTrouble` is called when `trouble` changes. */
export function start(whose, onTrouble) {
  member = whose;
  told = onTrouble;
  window.addEventListener("online", () => { pauses = 0; now(""); send(); });
  window.addEventListener("offline", () => now("network"));
  document.addEventListener("visibilitychange", () => { if (!document.hidden) { pauses = 0; send(); } });
  window.addEventListener("pageshow", (event) => { if (event.persisted) { pauses = 0; send(); } });
  send();
}

/** Sends what waits, now if nobody else does. */
export async function send() {
  if (running) { again = true; return; }
  if (!member) return;
  clearTimeout(timer);
  running = true;
  try {
    do { again = false; await round(); } while (again);
  } catch {
    later();
  } finally {
    running = false;
  }
}

async function round() {
  const waiting = async () => (await ticks.all()).filter((tick) => tick.state === "waiting" && tick.member === member);
  if (!(await waiting()).length) return;
  if (navigator.onLine === false) { now("network"); later(); return; }
  if (!(await ticks.lease(me, LEASE_MS))) { later(2000); return; }
  try {
    for (let [tick] = await waiting(); tick; [tick] = await waiting()) {
      if (!(await ticks.lease(me, LEASE_MS))) { later(2000); return; }
      // Withdrawn in this moment: the next one.
      if (!(await ticks.change(tick.id, { tried: true }))) continue;
      const answer = await post(tick);
      now(answer.trouble ?? "");
      if (answer.trouble) { later(); return; }
      pauses = 0;
      await ticks.change(tick.id, { ...answer, at: Date.now() });
    }
  } finally {
    await ticks.release(me);
  }
}

function later(pause = Math.min(LONGEST_PAUSE_MS, 1000 * 2 ** pauses) * (0.75 + Math.random() / 2)) {
  pauses += 1;
  clearTimeout(timer);
  timer = setTimeout(send, pause);
}

/** Posts a form and tells what came of it: { state, next }, { state, status, sentence, fields } or { trouble }. */
export async function post({ url, body, made, member: madeBy }) {
  const abort = new AbortController();
  const late = setTimeout(() => abort.abort(), PATIENCE_MS);
  try {
    const answer = await fetch(url, {
      method: "POST",
      body,
      // It goes on when the page is left.
      keepalive: true,
      credentials: "same-origin",
      redirect: "manual",
      cache: "no-store",
      signal: abort.signal,
      headers: {
        "Content-Type": "application/x-www-form-urlencoded",
        Accept: "application/json",
        "X-Leat-Member": madeBy,
        "X-Leat-Made-Ago": String(Math.max(0, Math.round((Date.now() - made) / 1000))),
      },
    });
    const kind = answer.headers.get("content-type") ?? "";
    const said = kind.includes("json") ? await answer.json() : null;
    if (answer.ok && said?.state === "saved") return { state: "saved", next: said.next };
    const problem = kind.startsWith("application/problem+json") ? said : null;
    if (answer.status === 401 && problem) return { trouble: "sign-in" };
    if (!problem || answer.status >= 500 || PASSING.includes(answer.status) || problem.type === "/problems/repeated") return { trouble: "server" };
    return { state: "refused", status: answer.status, sentence: problem.detail, fields: problem.errors ?? [] };
  } catch {
    return { trouble: "network" };
  } finally {
    clearTimeout(late);
  }
}
