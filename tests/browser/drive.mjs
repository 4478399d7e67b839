// Drives a headless chromium over the DevTools protocol through two pipes, with nothing but node: one page, its errors
// and requests noted. Chrome DevTools Protocol 1.3; messages end in a zero byte.
import { spawn } from "node:child_process";
import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { pathToFileURL } from "node:url";

/** How long a call may take, ms: a page of 15 MB on a busy machine. */
const PATIENCE = 90_000;

export class Browser {
  /** Starts the browser named by CHROMIUM, else `chromium`. */
  static async start() {
    const profile = mkdtempSync(join(tmpdir(), "veerlog-browser-"));
    const flags = ["--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--hide-scrollbars",
      "--no-first-run", "--disable-background-networking", "--remote-debugging-pipe", `--user-data-dir=${profile}`, "about:blank"];
    const child = spawn(process.env.CHROMIUM || "chromium", flags, { stdio: ["ignore", "ignore", "ignore", "pipe", "pipe"] });
    const browser = new Browser(child, profile);
    await browser.attach();
    return browser;
  }

  constructor(child, profile) {
    Object.assign(this, { child, profile, next: 1, waiting: new Map(), errors: [], requests: [], hearers: new Map(), session: undefined });
    let rest = Buffer.alloc(0);
    child.stdio[4].on("data", (bytes) => {
      rest = Buffer.concat([rest, bytes]);
      for (let end = rest.indexOf(0); end >= 0; end = rest.indexOf(0)) {
        this.hear(JSON.parse(rest.subarray(0, end).toString()));
        rest = rest.subarray(end + 1);
      }
    });
    const gone = (why) => { for (const { fail } of this.waiting.values()) fail(new Error("the browser is gone: " + why)); };
    child.on("error", gone);
    child.on("exit", gone);
    child.stdio[3].on("error", gone);
  }

  hear(message) {
    if (message.id) {
      const { done, fail, timer } = this.waiting.get(message.id) || {};
      clearTimeout(timer);
      this.waiting.delete(message.id);
      if (message.error) fail?.(new Error(message.error.message)); else done?.(message.result);
      return;
    }
    const { method, params } = message;
    if (method === "Runtime.exceptionThrown") this.errors.push(params.exceptionDetails.exception?.description || params.exceptionDetails.text);
    if (method === "Runtime.consoleAPICalled" && ["error", "assert"].includes(params.type)) this.errors.push(params.args.map((a) => a.value).join(" "));
    if (method === "Log.entryAdded" && ["error", "warning"].includes(params.entry.level)) this.errors.push(params.entry.text);
    if (method === "Network.requestWillBeSent") this.requests.push(params.request.url);
    this.hearers.get(method)?.(params);
  }

  send(method, params = {}, session = this.session) {
    const id = this.next++;
    return new Promise((done, fail) => {
      const timer = setTimeout(() => fail(new Error(method + " takes too long")), PATIENCE);
      this.waiting.set(id, { done, fail, timer });
      this.child.stdio[3].write(JSON.stringify({ id, method, params, sessionId: session }) + "\0");
    });
  }

  async attach() {
    const { targetInfos } = await this.send("Target.getTargets");
    const { targetId } = targetInfos.find((target) => target.type === "page");
    ({ sessionId: this.session } = await this.send("Target.attachToTarget", { targetId, flatten: true }));
    for (const domain of ["Page", "Runtime", "Log", "Network", "DOM"]) await this.send(domain + ".enable");
    await this.send("Network.emulateNetworkConditions", { offline: true, latency: 0, downloadThroughput: -1, uploadThroughput: -1 });
  }

  /** Opens a file and waits until it has loaded. */
  async open(path, { width = 1024, height = 900, dark = false } = {}) {
    await this.size(width, height);
    await this.send("Emulation.setEmulatedMedia", { features: [{ name: "prefers-color-scheme", value: dark ? "dark" : "light" }] });
    [this.errors, this.requests] = [[], []];
    const loaded = new Promise((done) => this.hearers.set("Page.loadEventFired", done));
    await this.send("Page.navigate", { url: pathToFileURL(path).href });
    await loaded;
    await this.settle();
  }

  size(width, height) {
    return this.send("Emulation.setDeviceMetricsOverride", { width, height, deviceScaleFactor: 1, mobile: false });
  }

  /** Waits for two frames to be painted. */
  settle() {
    return this.run("new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(() => done(true))))");
  }

  /** The value of an expression in the page. */
  async run(expression) {
    const { result, exceptionDetails } = await this.send("Runtime.evaluate", { expression, awaitPromise: true, returnByValue: true, userGesture: true });
    if (exceptionDetails) throw new Error(exceptionDetails.exception?.description || exceptionDetails.text);
    return result.value;
  }

  /** Middle of the first element of a selector, scrolled into view; `at` is a share of its width and height. */
  async place(selector, at = [0.5, 0.5]) {
    return this.run(`(() => { const e = document.querySelector(${JSON.stringify(selector)}); e.scrollIntoView({block: "center", behavior: "instant"});
      const b = e.getBoundingClientRect(); return [b.left + b.width * ${at[0]}, b.top + b.height * ${at[1]}]; })()`);
  }

  async mouse(type, [x, y], more = {}) {
    await this.send("Input.dispatchMouseEvent", { type, x, y, button: "left", buttons: type === "mouseReleased" ? 0 : 1, clickCount: 1, ...more });
  }

  async click(selector, at) {
    const place = typeof selector === "string" ? await this.place(selector, at) : selector;
    await this.mouse("mousePressed", place);
    await this.mouse("mouseReleased", place);
    await this.settle();
  }

  async key(key, more = {}) {
    const text = key.length === 1 ? key : undefined;
    await this.send("Input.dispatchKeyEvent", { type: text ? "keyDown" : "rawKeyDown", key, code: key === " " ? "Space" : key, text, ...more });
    await this.send("Input.dispatchKeyEvent", { type: "keyUp", key, ...more });
    await this.settle();
  }

  async picture(path, full = true) {
    const { writeFileSync } = await import("node:fs");
    const { data } = await this.send("Page.captureScreenshot", { format: "png", captureBeyondViewport: full });
    writeFileSync(path, Buffer.from(data, "base64"));
  }

  async stop() {
    await this.send("Browser.close", {}, undefined).catch(() => {});
    if (this.child.exitCode === null) await new Promise((done) => { this.child.once("exit", done); setTimeout(done, 3000); });
    if (this.child.exitCode === null) this.child.kill();
    rmSync(this.profile, { recursive: true, force: true, maxRetries: 5 });
  }
}
