// How long from a tap to the next line of the weigh-out, on loopback and over a slow network. Prints figures; decides
// nothing. Run it after `cargo build`: node measure.js

import { approvedPlan, tokenOf } from "./api.js";
import { signIn, startBrowser, startLeat } from "./leat.js";

const PLANS = 4;
/** Chromium’s own figures: https://chromedevtools.github.io/devtools-protocol/tot/Network; bytes a second and ms. */
const NETWORKS = {
  "loopback": null,
  "3G, 150 ms, 1.6 Mbit/s": { offline: false, latency: 150, downloadThroughput: 200_000, uploadThroughput: 93_750 },
  "slow 3G, 400 ms, 400 kbit/s": { offline: false, latency: 400, downloadThroughput: 50_000, uploadThroughput: 50_000 },
  "none": { offline: true, latency: 0, downloadThroughput: 0, uploadThroughput: 0 },
};

/** Milliseconds from the event of the tap to the frame that shows the next line. */
function watch() {
  globalThis.taps = [];
  let began = 0;
  const shown = () => document.querySelector("[data-line]:not([hidden])")?.dataset.line ?? "";
  document.addEventListener("submit", () => {
    began = performance.now();
    const was = shown();
    const look = () => (shown() === was ? requestAnimationFrame(look)
      : requestAnimationFrame(() => setTimeout(() => globalThis.taps.push(performance.now() - began))));
    requestAnimationFrame(look);
  }, { capture: true });
}

const leat = await startLeat({ demo: true });
const browser = await startBrowser();
try {
  const desk = await browser.newContext({ baseURL: leat.address });
  const token = await signIn(await desk.newPage(), "manager").then(() => tokenOf(desk.pages()[0]));
  for (const [name, network] of Object.entries(NETWORKS)) {
    const context = await browser.newContext({ baseURL: leat.address, viewport: { width: 1280, height: 800 }, isMobile: true, hasTouch: true, serviceWorkers: "block" });
    const page = await context.newPage();
    await page.addInitScript(watch);
    await signIn(page, "brewer");
    const cdp = await context.newCDPSession(page);
    await cdp.send("Network.enable");
    const taps = [];
    for (let plan = 0; plan < PLANS; plan += 1) {
      await page.goto(`${await approvedPlan(leat, token)}/weigh-out`);
      if (network) await cdp.send("Network.emulateNetworkConditions", network);
      // Not the last line: after it the page that follows is the server’s.
      for (let left = await page.locator("[data-line]").count(); left > 1; left -= 1) {
        const before = await page.evaluate(() => globalThis.taps.length);
        await page.locator("[data-line]:not([hidden])").getByRole("button", { name: /^As planned/ }).tap();
        await page.waitForFunction((had) => globalThis.taps.length > had, before);
        taps.push(await page.evaluate(() => globalThis.taps.at(-1)));
      }
      await cdp.send("Network.emulateNetworkConditions", { offline: false, latency: 0, downloadThroughput: -1, uploadThroughput: -1 });
    }
    taps.sort((a, b) => a - b);
    const at = (part) => Math.round(taps[Math.min(taps.length - 1, Math.floor(part * taps.length))]);
    console.log(`${name}: ${taps.length} taps, tap to next line ${at(0.5)} ms in the middle, ${at(0.95)} ms at p95, ${at(1)} ms at most`);
    await context.close();
  }
} finally {
  await browser.close();
  await leat.stop();
}
