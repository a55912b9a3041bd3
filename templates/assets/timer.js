// Counts down to the next reading. The end is a moment the server set, so a reload changes nothing.
//
//   <p data-timer-ends="2026-12-01T10:42:00Z" data-timer-label="Read again" data-timer-done="Read the mash now">
//       what is shown without scripts: "Read again at 10:42"
//
// With one on the page: "Read again in 6:12", the same in the title of the tab, a sound at the end if this device was
// told so, and a shake where it can.
const SOON_S = 60;
const timers = [...document.querySelectorAll("[data-timer-ends]")];
const title = document.title;
const SOUND = "leat-sound";
const SKEW = "leat-skew-ms";
let audio;

function remembered(name) {
  try { return localStorage.getItem(name); } catch { return null; }
}

function remember(name, value) {
  try { localStorage.setItem(name, value); } catch { /* it is asked again on the next page */ }
}

/** How far this device's clock is ahead of the server's, ms. A kept page tells nothing about it. */
function skew() {
  const { now, kept } = document.body.dataset;
  const arrived = performance.timeOrigin + (performance.getEntriesByType("navigation")[0]?.responseStart ?? 0);
  if (!now || kept) return Number(remembered(SKEW)) || 0;
  const ahead = Math.round(arrived - Date.parse(now));
  remember(SKEW, String(ahead));
  return ahead;
}

function left(timer) {
  return Math.ceil((Date.parse(timer.dataset.timerEnds) + ahead - Date.now()) / 1000);
}

const minutes = (seconds) => `${Math.floor(seconds / 60)}:${String(seconds % 60).padStart(2, "0")}`;

function tick() {
  const running = [];
  for (const timer of timers) {
    const seconds = left(timer);
    const clock = timer.querySelector(".timer-clock");
    if (seconds > 0) {
      clock.textContent = `${timer.dataset.timerLabel ?? "Read again"} in ${minutes(seconds)}`;
      timer.classList.toggle("soon", seconds <= SOON_S);
      running.push(seconds);
      continue;
    }
    if (timer.classList.contains("over")) continue;
    clock.textContent = timer.dataset.timerDone ?? "Read the mash now";
    timer.classList.remove("soon");
    timer.classList.add("over");
    timer.setAttribute("role", "alert");
    // One that ended while nobody looked is shown and not sounded.
    if (timer.dataset.ran) sound();
  }
  for (const timer of timers) if (!timer.classList.contains("over")) timer.dataset.ran = "yes";
  const over = timers.find((timer) => timer.classList.contains("over"));
  document.title = running.length ? `${minutes(Math.min(...running))} · ${title}` : over ? `${over.dataset.timerDone ?? "Read the mash now"} · ${title}` : title;
}

// Browsers let a page sound only after somebody touched it.
function wake() {
  if (remembered(SOUND) !== "on") return;
  audio ??= "AudioContext" in window ? new AudioContext() : null;
  if (audio?.state === "suspended") audio.resume();
}

function sound() {
  navigator.vibrate?.([300, 150, 300, 150, 600]);
  if (remembered(SOUND) !== "on" || audio?.state !== "running") return;
  for (const [at, pitch] of [[0, 880], [0.35, 880], [0.7, 1175]]) {
    const tone = audio.createOscillator();
    const volume = audio.createGain();
    const begins = audio.currentTime + at;
    tone.frequency.value = pitch;
    volume.gain.setValueAtTime(0.0001, begins);
    volume.gain.exponentialRampToValueAtTime(0.5, begins + 0.02);
    volume.gain.exponentialRampToValueAtTime(0.0001, begins + 0.3);
    tone.connect(volume).connect(audio.destination);
    tone.start(begins);
    tone.stop(begins + 0.32);
  }
}

function soundButton() {
  const button = document.createElement("button");
  button.type = "button";
  button.className = "button quiet timer-sound";
  const name = () => {
    const on = remembered(SOUND) === "on";
    button.textContent = on ? "Sound is on" : "Sound on";
    button.setAttribute("aria-pressed", String(on));
  };
  button.addEventListener("click", () => {
    remember(SOUND, remembered(SOUND) === "on" ? "off" : "on");
    wake();
    // Once at once, so that one hears whether it can be heard.
    sound();
    name();
  });
  name();
  return button;
}

const ahead = timers.length ? skew() : 0;
if (timers.length) {
  for (const timer of timers) {
    const clock = document.createElement("span");
    clock.className = "timer-clock";
    timer.replaceChildren(clock);
    timer.classList.add("timer");
  }
  timers[0].after(soundButton());
  document.addEventListener("pointerdown", wake);
  document.addEventListener("visibilitychange", tick);
  tick();
  setInterval(tick, 500);
}
