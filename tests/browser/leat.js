// A Leat of one's own: the program on a free port with a fresh database, and a Chromium to look at it.

import assert from "node:assert/strict";
import { spawn } from "node:child_process";
import { accessSync, constants, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { chromium } from "playwright-core";

const repository = path.resolve(import.meta.dirname, "../..");
const program = process.env.LEAT_PROGRAM || path.join(process.env.CARGO_TARGET_DIR || path.join(repository, "target"), "debug", "leat");

const FLAGS = [
  "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
  "--disable-background-networking", "--disable-component-update", "--disable-sync",
];

/** The password of everybody in these tests, and in the demonstration. */
export const PASSWORD = "open the sluice";

/** Starts the program. `demo` fills it with the invented brewery. */
export async function startLeat({ demo = false } = {}) {
  const folder = mkdtempSync(path.join(tmpdir(), "leat-browser-"));
  const database = path.join(folder, "leat.sqlite");
  let running = await run(database, "127.0.0.1:0", demo);
  const { address } = running;
  return {
    address,
    /** The address that makes the first account, as the program printed it. */
    async firstAccount() {
      for (let tries = 0; tries < 100; tries += 1) {
        const found = running.said().match(/http:\/\/\S+\/first-account\?token=[\w-]+/);
        if (found) return found[0];
        await new Promise((later) => setTimeout(later, 50));
      }
      throw new Error(`No address for the first account was printed:\n${running.said()}`);
    },
    /** Ends the program in the middle of whatever it does. */
    kill: () => running.end("SIGKILL"),
    /** Starts it again on the same database and port. */
    async startAgain() { running = await run(database, new URL(address).host, demo); },
    async stop() {
      await running.end("SIGTERM");
      rmSync(folder, { recursive: true, force: true });
    },
  };
}

async function run(database, listen, demo) {
  const asked = ["--database", database, "--listen", listen, "--log", "info"];
  if (demo) asked.push("--demo");
  const leat = spawn(program, asked, { stdio: ["ignore", "ignore", "pipe"], env: { ...process.env, NO_COLOR: "1" } });
  let said = "";
  const address = await new Promise((answer, refuse) => {
    const late = setTimeout(() => refuse(new Error(`Leat did not start in time:\n${said}`)), 60_000);
    leat.on("error", refuse);
    leat.on("exit", (code) => refuse(new Error(`Leat ended with ${code}:\n${said}`)));
    leat.stderr.on("data", (words) => {
      said += words;
      const found = said.match(/Leat answers at (http:\/\/[\d.:]+)/);
      if (!found) return;
      clearTimeout(late);
      answer(found[1]);
    });
  });
  return {
    address,
    said: () => said,
    async end(signal) {
      if (leat.exitCode !== null || leat.signalCode) return;
      leat.removeAllListeners("exit");
      const ended = new Promise((done) => leat.once("exit", done));
      leat.kill(signal);
      await ended;
    },
  };
}

/** Debian's Chromium, or whichever is on the path; CHROMIUM names another. */
function chromiumProgram() {
  const names = ["chromium", "chromium-browser", "google-chrome"];
  const places = (process.env.PATH || "").split(path.delimiter).flatMap((place) => names.map((name) => path.join(place, name)));
  const executablePath = process.env.CHROMIUM || places.find((place) => {
    try { accessSync(place, constants.X_OK); return true; } catch { return false; }
  });
  assert.ok(executablePath, "No Chromium was found; set CHROMIUM to its path");
  return executablePath;
}

export function startBrowser() {
  return chromium.launch({ executablePath: chromiumProgram(), args: FLAGS });
}

/** A browser that keeps what it knows in this folder, as one on a tablet does. */
export function startTablet(folder, options) {
  return chromium.launchPersistentContext(folder, { executablePath: chromiumProgram(), args: FLAGS, ...options });
}

/**
 * A window somebody looks through. It fails loudly where a page speaks to anybody but Leat, or complains.
 * `complaints` is for tests that expect some.
 */
export async function openWindow(browser, leat, options = {}) {
  const context = await browser.newContext({ baseURL: leat.address, viewport: { width: 1280, height: 800 }, reducedMotion: "reduce", serviceWorkers: "block", ...options });
  context.setDefaultTimeout(15_000);
  const complaints = [];
  context.on("request", (request) => {
    const { origin, protocol } = new URL(request.url());
    if (protocol !== "data:" && origin !== leat.address) complaints.push(`asked another server: ${request.url()}`);
  });
  context.on("console", (message) => {
    // A refused form comes back with 4xx, which Chromium also writes to its console.
    const refused = /the server responded with a status of 4(09|22)/.test(message.text());
    // So do we, for the service worker: it would answer where a test stands in for the network.
    const blocked = message.text().startsWith("Service Worker registration blocked");
    if (["error", "warning"].includes(message.type()) && !refused && !blocked) complaints.push(`console: ${message.text()}`);
  });
  context.on("weberror", (error) => complaints.push(`script: ${error.error()}`));
  const page = await context.newPage();
  return {
    context,
    page,
    complaints,
    async close() {
      await context.close();
      assert.deepEqual(complaints, [], "the pages complained or spoke to another server");
    },
  };
}

/** Signs somebody in by the form. */
export async function signIn(page, login) {
  await page.goto("/sign-in");
  await page.getByLabel("Name you sign in with").fill(login);
  await page.getByLabel("Password").fill(PASSWORD);
  await page.getByRole("button", { name: "Sign in" }).click();
  await page.getByRole("heading", { level: 1, name: "Brew day" }).waitFor();
}

/** Makes the first account at the address the program printed. */
export async function makeFirstAccount(page, leat) {
  await page.goto(await leat.firstAccount());
  await page.getByLabel("Your name, as the record book prints it").fill("Mere Warden");
  await page.getByLabel("Name you sign in with").fill("mere");
  await page.getByLabel("Password").fill(PASSWORD);
  await page.getByRole("button", { name: "Make the account" }).click();
}
