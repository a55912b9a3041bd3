// The ticks of the weigh-out that wait on this device, in IndexedDB: it works on plain http and outlives the browser.
//
// A tick: { id, key, url, body, member, memberName, page, line, words, made, state, tried, sentence, fields, at }
//   state   "waiting" (to be sent), "refused" (the server said no; kept until somebody has seen it) or
//           "saved" (kept a while, so that a page that slept does not offer the line again)
//   key     the form's own _key: the server applies it once, however often it is sent
//   tried   whether it may have reached the server; from then on nobody can withdraw it here
const SAVED_FOR_MS = 12 * 3600 * 1000;
const news = "BroadcastChannel" in globalThis ? new BroadcastChannel("leat-ticks") : null;
let opened;

function open() {
  opened ??= new Promise((done, failed) => {
    const request = indexedDB.open("leat", 1);
    request.onupgradeneeded = () => {
      const ticks = request.result.createObjectStore("ticks", { keyPath: "id", autoIncrement: true });
      ticks.createIndex("key", "key", { unique: true });
      ticks.createIndex("url", "url");
      request.result.createObjectStore("leases", { keyPath: "name" });
    };
    request.onblocked = () => failed(new Error("IndexedDB is held by another version"));
    request.onerror = () => failed(request.error);
    request.onsuccess = () => {
      const db = request.result;
      db.onversionchange = () => { db.close(); opened = undefined; };
      db.onclose = () => { opened = undefined; };
      done(db);
    };
  });
  opened.catch(() => { opened = undefined; });
  return opened;
}

/** Runs `work` in one transaction; the answer comes when it is on the disk. */
async function write(store, work) {
  const db = await open();
  return new Promise((done, failed) => {
    // "strict": a tick that was shown as kept survives a dead battery.
    const transaction = db.transaction(store, "readwrite", { durability: "strict" });
    let answer;
    transaction.oncomplete = () => done(answer);
    transaction.onabort = () => failed(transaction.error ?? new Error("The tick could not be kept"));
    work(transaction.objectStore(store), (value) => { answer = value; });
  });
}

function tell() {
  news?.postMessage("changed");
  for (const listener of listeners) listener();
}

const listeners = new Set();

if (news) news.onmessage = () => { for (const listener of listeners) listener(); };

/** Calls `listener` when a tick changes, here or in another tab; the answer ends that. */
export function onChange(listener) {
  listeners.add(listener);
  return () => listeners.delete(listener);
}

/** Every tick on this device, oldest first. */
export async function all() {
  const db = await open();
  return new Promise((done, failed) => {
    const request = db.transaction("ticks").objectStore("ticks").getAll();
    request.onsuccess = () => done(request.result);
    request.onerror = () => failed(request.error);
  });
}

/**
 * Keeps a tick and answers it; where its line has one already, answers that one and keeps nothing.
 * A refused tick gives way to the one that mends it.
 */
export async function add(tick) {
  const kept = await write("ticks", (ticks, answer) => {
    const request = ticks.index("url").getAll(tick.url);
    request.onsuccess = () => {
      const standing = request.result.find(({ state, key }) => state === "waiting" || (state === "saved" && key === tick.key));
      if (standing) { answer({ tick: standing, added: false }); return; }
      for (const old of request.result) ticks.delete(old.id);
      const whole = { ...tick, state: "waiting", tried: false };
      ticks.add(whole).onsuccess = (event) => answer({ tick: { ...whole, id: event.target.result }, added: true });
    };
  });
  tell();
  return kept;
}

/** Changes a tick that still waits; answers whether it did. */
export async function change(id, changes) {
  const changed = await write("ticks", (ticks, answer) => {
    answer(false);
    const request = ticks.get(id);
    request.onsuccess = () => {
      if (request.result?.state !== "waiting") return;
      ticks.put({ ...request.result, ...changes });
      answer(true);
    };
  });
  if (changed && changes.state) tell();
  return changed;
}

/** Forgets a tick, if the test holds for it as it is now. */
export async function forget(id, test) {
  const gone = await write("ticks", (ticks, answer) => {
    answer(false);
    const request = ticks.get(id);
    request.onsuccess = () => {
      if (!request.result || !test(request.result)) return;
      ticks.delete(id);
      answer(true);
    };
  });
  if (gone) tell();
  return gone;
}

/** Forgets what was saved long ago. */
export async function tidy() {
  const before = Date.now() - SAVED_FOR_MS;
  await write("ticks", (ticks) => {
    const request = ticks.getAll();
    request.onsuccess = () => {
      for (const { id, state, at } of request.result) if (state === "saved" && at < before) ticks.delete(id);
    };
  });
}

/**
 * Takes or keeps the right to send for `ms`; answers whether `holder` has it. One tab at a time: navigator.locks would
 * do, but not on plain http. A lease that ends far in the future was made by a clock that was set since.
 */
export function lease(holder, ms) {
  return write("leases", (leases, answer) => {
    const request = leases.get("sender");
    request.onsuccess = () => {
      const now = Date.now();
      const held = request.result;
      const taken = held && held.holder !== holder && held.until > now && held.until < now + 2 * 60_000;
      answer(!taken);
      if (!taken) leases.put({ name: "sender", holder, until: now + ms });
    };
  });
}

/** Gives the right to send back. */
export function release(holder) {
  return write("leases", (leases) => {
    const request = leases.get("sender");
    request.onsuccess = () => { if (request.result?.holder === holder) leases.delete("sender"); };
  });
}
