// Keeps the weigh-out on a tablet that has lost the network. Over https only: browsers give no worker on plain http.
//
// The network comes first, always; what is kept is shown when there is none. Kept are what pages are made of, and
// those pages which the server says may be kept (X-Leat-Keep). They belong to one person: when another signs in, or
// the same one signs out, they are dropped. Nothing that is sent passes through here; that is the work of queue.js.
"use strict";

const ASSETS = [
  "/assets/leat.css", "/assets/components.css", "/assets/charts.css", "/assets/offline.css", "/assets/icon.svg",
  "/assets/leat.js", "/assets/queue.js", "/assets/ticks.js", "/assets/sender.js", "/assets/notices.js", "/assets/kept.js", "/assets/timer.js",
];
const PARTS = "leat-parts";
const KEPT = "leat-kept";
const MOST_KEPT = 12;
/** How long the network may be silent before what is kept is shown, ms. */
const PATIENCE_MS = 6000;
/** A proxy says these where Leat itself cannot be reached. */
const NOBODY_HOME = [502, 503, 504];

self.addEventListener("install", (event) => {
  event.waitUntil(caches.open(PARTS).then((parts) => parts.addAll(ASSETS)).then(() => self.skipWaiting()));
});

self.addEventListener("activate", (event) => event.waitUntil(self.clients.claim()));

// A page says whose it is; what is kept of anybody else goes. One that was loaded before this worker began asks to be kept.
self.addEventListener("message", (event) => {
  const { member = "", keep } = event.data ?? {};
  event.waitUntil(dropOthers(member).then(async () => {
    if (keep) await keepPage(keep, await fetch(keep, { credentials: "same-origin" }));
  }).catch(() => { /* no network: it is kept the next time */ }));
});

self.addEventListener("fetch", (event) => {
  const { request } = event;
  const { origin, pathname } = new URL(request.url);
  if (origin !== self.location.origin) return;
  if (request.method === "POST" && pathname === "/sign-out") event.waitUntil(caches.delete(KEPT));
  if (request.method !== "GET") return;
  if (pathname.startsWith("/assets/")) event.respondWith(part(request));
  else if (request.mode === "navigate") event.respondWith(page(event));
});

function impatient(promise) {
  return Promise.race([promise, new Promise((_, late) => setTimeout(() => late(new Error("late")), PATIENCE_MS))]);
}

async function part(request) {
  const parts = await caches.open(PARTS);
  const known = await parts.match(request, { ignoreSearch: true });
  try {
    const answer = await (known ? impatient(fetch(request)) : fetch(request));
    if (answer.ok && known) await parts.put(request.url.split("?")[0], answer.clone());
    return answer;
  } catch (problem) {
    if (known) return known;
    throw problem;
  }
}

async function page(event) {
  const { request } = event;
  const kept = await (await caches.open(KEPT)).match(new URL(request.url).pathname);
  try {
    const answer = await (kept ? impatient(fetch(request)) : fetch(request));
    if (kept && NOBODY_HOME.includes(answer.status)) return fromShelf(kept);
    if (answer.ok && answer.headers.has("x-leat-keep")) event.waitUntil(keepPage(request.url, answer.clone()));
    return answer;
  } catch {
    return kept ? fromShelf(kept) : nothingKept();
  }
}

async function keepPage(url, answer) {
  if (!answer.ok || answer.redirected || !answer.headers.has("x-leat-keep")) return;
  const text = await answer.text();
  const member = text.match(/<body[^>]* data-member="([^"]+)"/)?.[1];
  if (!member) return;
  await dropOthers(member);
  const shelf = await caches.open(KEPT);
  const headers = new Headers({ "content-type": "text/html; charset=utf-8", "x-leat-kept-for": member, "x-leat-kept-at": new Date().toISOString() });
  for (const name of ["content-security-policy", "referrer-policy", "x-content-type-options"]) {
    if (answer.headers.has(name)) headers.set(name, answer.headers.get(name));
  }
  const { pathname } = new URL(url);
  // Deleted first, so that the order of the keys is the order in which pages were opened.
  await shelf.delete(pathname);
  await shelf.put(pathname, new Response(text, { headers }));
  const pages = await shelf.keys();
  for (const old of pages.slice(0, Math.max(0, pages.length - MOST_KEPT))) await shelf.delete(old);
}

async function dropOthers(member) {
  const shelf = await caches.open(KEPT);
  for (const key of await shelf.keys()) {
    const kept = await shelf.match(key);
    if (kept?.headers.get("x-leat-kept-for") !== member) await shelf.delete(key);
  }
}

/** The kept page, which says of itself how old it is. */
async function fromShelf(kept) {
  const text = (await kept.text()).replace("<body", `<body data-kept="${kept.headers.get("x-leat-kept-at")}"`);
  return new Response(text, { headers: kept.headers });
}

async function nothingKept() {
  const pages = await (await caches.open(KEPT)).keys();
  const links = await Promise.all(pages.reverse().map(async (key) => {
    const text = await (await (await caches.open(KEPT)).match(key)).text();
    const title = text.match(/<title>([^<]*)<\/title>/)?.[1] ?? "A weigh-out";
    return `<li><a href="${new URL(key.url).pathname}"><span class="row-title">${title}</span></a></li>`;
  }));
  const list = links.length ? `<p>Kept on this tablet:</p><ul class="row-list">${links.join("")}</ul>` : "<p>No weigh-out is kept on this tablet.</p>";
  const text = `<!doctype html><html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1"><meta name="color-scheme" content="light dark"><title>No network</title><link rel="stylesheet" href="/assets/leat.css"><link rel="stylesheet" href="/assets/components.css"></head><body><main class="bench"><h1>No network</h1><p class="lead">Leat does not answer. Ticks that wait stay on this tablet; load the page again when the network is back.</p>${list}</main></body></html>`;
  return new Response(text, { status: 503, headers: { "content-type": "text/html; charset=utf-8", "content-security-policy": "default-src 'none'; style-src 'self'; img-src 'self'" } });
}
