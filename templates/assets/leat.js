// A little quickness on top of pages that work without it. No rule lives here: the server answers, we show.
//
//   <form data-live="/address" data-live-target="#answers">  on input, sends the form (its own method, or
//       data-live-method) and replaces the target with the HTML fragment that comes back
//   <select data-autosubmit>        or a form: submits on change
//   <button data-confirm="…?">      asks first
//   every POST form                 is sent once; its buttons rest until the answer comes
//
// Plain http on the brewery's own network: nothing here needs a secure context.
"use strict";
(() => {
  const WAIT_MS = 250;
  const SENT_FOR_MS = 20000;
  const pending = new WeakMap();

  // Read as an attribute: a form may have a field named "method", which would stand in for form.method.
  function methodOf(form) {
    return (form.getAttribute("method") || "get").toLowerCase();
  }

  function place(root, element) {
    if (!element || !root.contains(element)) return null;
    let from = null, to = null;
    try { from = element.selectionStart; to = element.selectionEnd; } catch { /* some inputs have no caret */ }
    return { id: element.id, name: element.name, value: element.value, from, to };
  }

  function restore(root, was) {
    if (!was) return;
    const found = was.id ? document.getElementById(was.id)
      : [...root.querySelectorAll("[name]")].find((field) => field.name === was.name);
    if (!found) return;
    if (found.value !== was.value && found.matches("input:not([type=checkbox]):not([type=radio]), textarea")) found.value = was.value;
    found.focus({ preventScroll: true });
    try { if (was.from !== null) found.setSelectionRange(was.from, was.to); } catch { /* no caret */ }
  }

  async function refresh(form) {
    const target = document.querySelector(form.dataset.liveTarget);
    if (!target) return;
    pending.get(form)?.abort?.abort();
    const abort = new AbortController();
    pending.set(form, { abort });
    target.setAttribute("aria-busy", "true");
    const method = (form.dataset.liveMethod || methodOf(form)).toUpperCase();
    const body = new URLSearchParams();
    // Names beginning with _ belong to sending the form for good, such as the key that applies it once.
    for (const [name, value] of new FormData(form)) if (typeof value === "string" && !name.startsWith("_")) body.append(name, value);
    const address = new URL(form.dataset.live, location.href);
    if (method === "GET") address.search = body;
    try {
      const answer = await fetch(address, { method, body: method === "GET" ? undefined : body, credentials: "same-origin", headers: { Accept: "text/html" }, signal: abort.signal });
      // A redirect means the session ended; anything but an answer or a form with problems is no fragment.
      if (answer.redirected || !(answer.ok || answer.status === 422)) throw new Error("no fragment");
      const html = await answer.text();
      if (abort.signal.aborted) return;
      const was = place(target, document.activeElement);
      const holder = document.createElement("template");
      holder.innerHTML = html;
      const whole = target.id && holder.content.querySelector("#" + CSS.escape(target.id));
      if (whole) target.replaceWith(whole);
      else { target.replaceChildren(holder.content); settle(target); }
      restore(whole || target, was);
    } catch (problem) {
      if (problem.name === "AbortError") return;
      target.removeAttribute("aria-busy");
      target.classList.add("stale");
      target.dataset.stale = "Not up to date: the server did not answer. Change a figure or press the button to try again.";
    }
  }

  function settle(target) {
    target.removeAttribute("aria-busy");
    target.classList.remove("stale");
    delete target.dataset.stale;
  }

  document.addEventListener("input", (event) => {
    const form = event.target.form;
    if (!form?.dataset.live) return;
    const was = pending.get(form) || {};
    clearTimeout(was.timer);
    pending.set(form, { ...was, timer: setTimeout(() => refresh(form), WAIT_MS) });
  });

  document.addEventListener("change", (event) => {
    const form = event.target.form;
    if (form && (form.hasAttribute("data-autosubmit") || event.target.hasAttribute("data-autosubmit"))) form.requestSubmit();
  });

  document.addEventListener("click", (event) => {
    const asked = event.target.closest("[data-confirm]");
    if (asked && !window.confirm(asked.dataset.confirm)) event.preventDefault();
    const menu = document.querySelector("details.menu[open]");
    if (menu && !menu.contains(event.target)) menu.open = false;
  });

  function rest(form, resting) {
    if (resting) form.dataset.sent = "yes"; else delete form.dataset.sent;
    for (const button of form.querySelectorAll("button, input[type=submit]")) {
      if (resting && !button.disabled) { button.disabled = true; button.dataset.rests = "yes"; }
      if (!resting && button.dataset.rests) { button.disabled = false; delete button.dataset.rests; }
    }
  }

  document.addEventListener("submit", (event) => {
    const form = event.target;
    if (event.defaultPrevented || methodOf(form) !== "post") return;
    if (form.dataset.sent) { event.preventDefault(); return; }
    // After this turn, so that the pressed button's own name and value still go with the form.
    setTimeout(() => rest(form, true), 0);
    setTimeout(() => rest(form, false), SENT_FOR_MS);
  });

  window.addEventListener("pageshow", (event) => {
    if (event.persisted) document.querySelectorAll("form[data-sent]").forEach((form) => rest(form, false));
  });

  document.querySelector(".problem-summary")?.focus();
})();
