// What the queue says on a page: in the band of every page, above the weigh-out, beside each line. Words only; queue.js
// decides.
const clock = (at) => new Date(at).toLocaleTimeString([], { hour: "2-digit", minute: "2-digit", hourCycle: "h23" });
const count = (ticks) => (ticks.length === 1 ? "1 tick" : `${ticks.length} ticks`);
const wait = (ticks) => `${count(ticks)} ${ticks.length === 1 ? "waits" : "wait"} on this tablet`;
/** An answer usually comes before anybody could read that it is awaited. */
const SOON_MS = 1500;

function make(name, className, text = "", ...children) {
  const element = document.createElement(name);
  if (className) element.className = className;
  if (text) element.textContent = text;
  element.append(...children);
  return element;
}

function press(words, act) {
  const button = make("button", "button quiet", words);
  button.type = "button";
  button.addEventListener("click", act);
  return button;
}

/** What a tick is called: "12 g Gypsum into the mash". */
export function describe(form, line) {
  const words = (line ?? form).dataset.words ?? line?.querySelector(".weigh-material")?.textContent ?? document.querySelector("h1")?.textContent ?? "A tick";
  return words.replace(/\s+/g, " ").trim();
}

/** Says at the top of a line what was wrong, and beside each field. `fields`: { pointer, detail }. */
export function problem(place, title, sentences, fields = []) {
  place.querySelector(":scope > .problem-summary, form > .problem-summary")?.remove();
  for (const old of place.querySelectorAll(".field-error.told")) old.remove();
  const list = make("ul", "", "", ...sentences.map((sentence) => make("li", "", sentence)));
  const box = make("div", "notice danger problem-summary", "", make("div", "", "", make("h2", "", title), list));
  box.setAttribute("role", "alert");
  box.tabIndex = -1;
  place.prepend(box);
  for (const { pointer, detail } of fields) {
    const field = place.querySelector(`[name="${CSS.escape(pointer.slice(1).replaceAll("/", "."))}"]`);
    if (!field) continue;
    field.setAttribute("aria-invalid", "true");
    const error = make("p", "field-error told", "", make("span", "field-error-mark", "!"), ` ${detail}`);
    (field.closest(".with-unit") ?? field).before(error);
  }
  return box;
}

/** A refusal that no mending undoes: it goes when somebody has seen it. */
export function toBeSeen(box, seen) {
  box.firstElementChild.append(press("I have seen this", seen));
}

/** A tick that is no line of a list, below its button. */
export function waits(form, tick) {
  if (form.querySelector(".queue-waits")) return;
  const told = make("p", "queue-waits", `Ticked at ${clock(tick.made)}. It is kept on this tablet until the server has it.`);
  told.setAttribute("role", "status");
  form.append(told);
}

const STATES = { waiting: "waits", saved: "saved", refused: "not accepted" };

/** Marks the lines in the list of lines, and the stones of the way above. `lines`: { id, state, now }. */
export function states(lines) {
  const items = [...document.querySelectorAll("[data-line-state]")];
  for (const { id, state, now } of lines) {
    const item = items.find(({ dataset }) => dataset.lineState === id);
    if (!item) continue;
    if (state) item.dataset.state = state; else delete item.dataset.state;
    item.classList.toggle("now", now);
    item.classList.toggle("done", ["waiting", "saved"].includes(state));
    item.classList.toggle("next", !now && ["", "refused"].includes(state));
    if (now) item.setAttribute("aria-current", "step"); else item.removeAttribute("aria-current");
    const words = item.querySelector(".line-state") ?? item.appendChild(make("span", "line-state"));
    words.textContent = STATES[state] ?? (now ? "now" : "");
  }
  const stones = document.querySelectorAll(".steps li");
  if (stones.length === items.length) stones.forEach((stone, at) => { stone.className = ["now", "done"].find((name) => items[at].classList.contains(name)) ?? "next"; });
}

/** One sentence about the ticks of this member, or "". */
function sentence(mine, trouble) {
  const waiting = mine.filter(({ state }) => state === "waiting");
  const refused = mine.filter(({ state }) => state === "refused");
  if (trouble === "network" && waiting.length) return `No network: ${wait(waiting)}`;
  if (trouble === "sign-in" && waiting.length) return `Sign in again: ${wait(waiting)}`;
  if (trouble === "server" && waiting.length) return `The server does not answer: ${wait(waiting)}`;
  if (refused.length) return refused.length === 1 ? "1 tick was not accepted" : `${refused.length} ticks were not accepted`;
  if (waiting.some(({ made }) => Date.now() - made > SOON_MS)) return `${wait(waiting)} to be sent`;
  return "";
}

/** About ticks of others, who alone can send them. */
function ofOthers(others) {
  const names = [...new Set(others.map(({ memberName }) => memberName))];
  return names.map((name) => `${wait(others.filter(({ memberName }) => memberName === name))} until ${name} signs in here`).join(". ");
}

/** Says on the page, and in its band, how the ticks of this device stand. */
export function tell(list, about) {
  const { member, trouble, weighing } = about;
  const mine = list.filter((tick) => tick.member === member && tick.state !== "saved");
  const others = list.filter((tick) => tick.member !== member && tick.state === "waiting");
  const ofThem = others.length ? ofOthers(others) : "";
  band([sentence(mine, trouble), ofThem].filter(Boolean).join(". "), mine[0] ?? others[0], trouble);
  if (weighing) aboutLines(list, about, ofThem);
}

function band(said, first, trouble) {
  let chip = document.querySelector(".queue-chip");
  if (!said) { chip?.parentElement.remove(); return; }
  if (!chip) {
    chip = make("a", "queue-chip");
    const status = make("p", "queue-band", "", chip);
    status.setAttribute("role", "status");
    document.querySelector(".band .mark")?.after(status);
  }
  chip.href = trouble === "sign-in" ? `/sign-in?next=${encodeURIComponent(first.page)}` : first.page;
  if (chip.textContent !== said) chip.textContent = said;
}

function aboutLines(list, { member, trouble, left, act }, others) {
  // A refused line that is on the page says so itself.
  const here = list.filter(({ page, state, line }) => page === location.pathname && state !== "saved" && !(state === "refused" && document.querySelector(`[data-line="${CSS.escape(line)}"]`)));
  const said = sentence(here.filter((tick) => tick.member === member), trouble);
  const parts = [];
  if (document.body.dataset.kept) parts.push(`Kept copy from ${clock(document.body.dataset.kept)}: what others weighed in since is not on it`);
  if (trouble === "network") parts.push(said || "No network", "Go on weighing: what you tick is sent when the network is back");
  else if (said) parts.push(said);
  if (others) parts.push(others);
  if (!left) parts.push("Every line is ticked");
  let box = document.querySelector(".queue-notice");
  if (!parts.length) { box?.remove(); return; }
  if (!box) {
    box = make("div", "queue-notice notice");
    box.setAttribute("role", "status");
    document.querySelector("main h1")?.after(box);
  }
  box.classList.toggle("doubt", Boolean(trouble));
  const text = parts.map((part) => `${part}.`).join(" ");
  const rows = here.map((tick) => row(tick, member, act));
  // Written anew only when it differs: somebody may be about to touch a button in it.
  const print = text + rows.map((each) => each.textContent).join("|");
  if (box.dataset.print === print) return;
  box.dataset.print = print;
  const open = box.querySelector("details")?.open;
  const all = make("details", "", "", make("summary", "", `Not saved yet: ${rows.length}`), make("ul", "row-list", "", ...rows));
  if (open) all.open = true;
  box.replaceChildren(make("p", "", text), ...(rows.length ? [all] : []));
}

function row(tick, member, act) {
  const words = `${tick.words}, ticked at ${clock(tick.made)} by ${tick.memberName}`;
  const told = tick.state === "refused" ? `: ${tick.sentence}` : tick.tried ? ". It may have reached the server; that is settled when the network is back." : "";
  const item = make("li", "", "", make("p", "", words + told));
  if (tick.member !== member) return item;
  if (tick.state === "waiting" && !tick.tried) item.append(press("Withdraw", () => act("withdraw", tick)));
  if (tick.state === "refused") item.append(press("I have seen this", () => act("seen", tick)));
  return item;
}
