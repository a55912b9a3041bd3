// On an enrolled tablet: back to the names when nobody touches it, without losing what was typed.
//
// The server ends an idle session by itself; this shows the names as soon as it does, says meanwhile that somebody
// is still typing, and keeps typed but unsent text on the device, for the same page and the same person only.
// Passwords and PINs are never kept. Without a script one lands on the same page after the PIN, only emptied.
"use strict";
(() => {
  const { member, here, tabletIdle } = document.body.dataset;
  const IDLE_MS = 1000 * Number(tabletIdle);
  const STAY_MS = IDLE_MS / 10;
  const KEPT_FOR_MS = 12 * 3600 * 1000;
  const MARK = "leat-typed ";
  const mine = member && MARK + member + " " + here;

  // What was typed

  function keys(mark) {
    return Object.keys(sessionStorage).filter((key) => key.startsWith(mark));
  }

  function read(key) {
    try { return JSON.parse(sessionStorage.getItem(key)); } catch { return null; }
  }

  function write(key, entry) {
    try { sessionStorage.setItem(key, JSON.stringify(entry)); } catch { /* full or forbidden: nothing is kept */ }
  }

  // Read as attributes: a form may have a field of that name.
  function posted() {
    return [...document.querySelectorAll("main form")].filter((form) => (form.getAttribute("method") || "").toLowerCase() === "post");
  }

  function typedInto(form) {
    return [...form.elements].filter((field) => field.name
      && field.matches("textarea, select, input:not([type=hidden]):not([type=password]):not([type=file]):not([type=submit])"));
  }

  function changed(field) {
    if (field.matches("select")) return [...field.options].some((option) => option.selected !== option.defaultSelected && (option.selected || option.defaultSelected));
    if (field.matches("[type=checkbox], [type=radio]")) return field.checked !== field.defaultChecked;
    return field.value !== field.defaultValue;
  }

  function keep() {
    if (!mine) return;
    // A form that came back with problems holds what was typed as if it had always been there.
    const returned = document.querySelector(".problem-summary") !== null;
    const forms = posted().map((form, index) => {
      const fields = typedInto(form);
      if (!fields.some((field) => changed(field) || (returned && field.value !== ""))) return null;
      return {
        index, action: form.getAttribute("action"),
        fields: fields.map((field) => ({ name: field.name, value: field.value, checked: field.checked })),
        // So that the server still sees that somebody else changed it meanwhile, or that it was applied already.
        sent: ["version", "_key"].map((name) => [name, form.elements.namedItem(name)?.value]).filter(([, value]) => value !== undefined),
      };
    }).filter(Boolean);
    if (forms.length) write(mine, { at: Date.now(), left: false, forms, scroll: scrollY });
    else sessionStorage.removeItem(mine);
  }

  function fill(entry) {
    const forms = posted();
    let filled = 0;
    for (const was of entry.forms) {
      const alike = forms.filter((form) => form.getAttribute("action") === was.action);
      const form = alike.includes(forms[was.index]) ? forms[was.index] : alike[0];
      if (!form) continue;
      const rest = typedInto(form);
      for (const { name, value, checked } of was.fields) {
        const at = rest.findIndex((field) => field.name === name && (!field.matches("[type=radio], [type=checkbox]") || field.value === value));
        if (at < 0) continue;
        const [field] = rest.splice(at, 1);
        if (field.matches("[type=checkbox], [type=radio]")) field.checked = checked; else field.value = value;
        filled += 1;
        field.closest("details")?.setAttribute("open", "");
      }
      for (const [name, value] of was.sent) {
        const field = form.elements.namedItem(name);
        if (field?.type === "hidden") field.value = value;
      }
      form.querySelector("input, textarea, select")?.dispatchEvent(new Event("input", { bubbles: true }));
    }
    if (!filled) return;
    const said = document.createElement("p");
    said.className = "flash";
    said.setAttribute("role", "status");
    said.textContent = "What you typed at " + new Date(entry.at).toTimeString().slice(0, 5) + " is back. It was not sent yet.";
    document.querySelector("main")?.prepend(said);
    scrollTo(0, entry.scroll);
  }

  // A page of a person follows: what was typed on the page before was sent, or left on purpose. The names follow:
  // it was interrupted, and is kept.
  function arrive() {
    if (!member) {
      let last = null;
      for (const key of keys(MARK)) {
        const entry = read(key);
        if (!entry || Date.now() - entry.at > KEPT_FOR_MS) { sessionStorage.removeItem(key); continue; }
        if (!entry.left) { write(key, { ...entry, left: true }); last = key; }
      }
      const came = last && last.slice(MARK.length).split(" ").slice(1).join(" ");
      if (came) for (const field of document.querySelectorAll("input[name=next]")) field.value = came;
      return;
    }
    for (const key of keys(MARK + member + " ")) {
      const entry = read(key);
      if (key === mine && entry?.left) fill(entry);
      if (key === mine || !entry?.left) sessionStorage.removeItem(key);
    }
  }

  // Who is there

  let touched = Date.now();
  let stayed = touched;
  let busy = false;

  function toNames() {
    keep();
    location.replace("/sign-in?next=" + encodeURIComponent(here));
  }

  async function ask(address, method, body) {
    busy = true;
    try { return await fetch(address, { method, body, redirect: "manual", credentials: "same-origin", cache: "no-store" }); }
    catch { return null; /* no network: asked again at the next tick */ }
    finally { busy = false; }
  }

  async function tick() {
    const now = Date.now();
    if (busy) return;
    if (now - touched >= IDLE_MS) {
      if (!member) { if (new URLSearchParams(location.search).has("who")) location.replace("/sign-in" + location.search.replace(/([?&])who=[^&]*/, "$1")); return; }
      // Without network nobody could come back: then the page stays as it is.
      if (await ask("/switch", "POST", new URLSearchParams({ next: here })) && Date.now() - touched >= IDLE_MS) toNames();
      return;
    }
    if (member && touched > stayed && now - stayed > STAY_MS) {
      stayed = now;
      const answer = await ask("/session", "GET");
      if (answer?.type === "opaqueredirect") toNames();
    }
  }

  for (const kind of ["pointerdown", "keydown", "input", "wheel", "touchmove"]) {
    document.addEventListener(kind, () => { touched = Date.now(); }, { capture: true, passive: true });
  }
  document.addEventListener("visibilitychange", () => { if (document.hidden) keep(); else tick(); });
  addEventListener("pagehide", keep);
  arrive();
  setInterval(tick, 1000);
})();
