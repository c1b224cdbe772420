// A real daemon on a bench of simulated sinks, and a real browser: what every test of the page
// sits at. Nothing here waits by sleeping alone: it waits for what happens.

import { type ChildProcess, spawn } from "node:child_process";
import { existsSync, mkdirSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { createRequire } from "node:module";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { createInterface } from "node:readline";
import { type Browser, type BrowserContext, type Page, chromium } from "playwright-core";

export const ROOT = process.env["SINKWARDEN_ROOT"] ?? join(process.cwd(), "..");
const TARGET = process.env["CARGO_TARGET_DIR"] ?? join(ROOT, "target");
const PROGRAM = process.env["SINKWARDEN"] ?? join(TARGET, "debug", "sinkwarden");
/** Pictures of the page, to be looked at. */
export const PICTURES = join(TARGET, "page");
const BROWSERS = ["/usr/bin/chromium", "/usr/bin/chromium-browser", "/usr/bin/google-chrome"];

export const DESKTOP = { width: 1280, height: 900 };
export const PHONE = { width: 390, height: 844 };

/** A daemon process and its folder. */
export class Daemon {
  #child: ChildProcess | null = null;
  url = "";

  private constructor(
    readonly folder: string,
    private readonly factor: number,
    private port: number,
  ) {}

  static async open(factor: number, bench?: (text: string) => string): Promise<Daemon> {
    const folder = mkdtempSync(join(tmpdir(), "page-"));
    const weir = readFileSync(join(ROOT, "crates/sink/src/bench/weir.toml"), "utf8");
    writeFileSync(join(folder, "bench.toml"), bench ? bench(weir) : weir);
    const daemon = new Daemon(folder, factor, 0);
    await daemon.start();
    return daemon;
  }

  /** Starts it, on the port it had before if it had one. */
  async start(): Promise<void> {
    const bench = join(this.folder, "bench.toml");
    const options = ["--listen", `127.0.0.1:${this.port}`, "--time-factor", String(this.factor), "--log", "warn"];
    const child = spawn(PROGRAM, ["serve", "--bench", bench, ...options], {
      stdio: ["ignore", "pipe", "inherit"],
    });
    this.#child = child;
    const lines = createInterface({ input: child.stdout });
    this.url = await new Promise<string>((resolve, reject) => {
      lines.once("line", (line) => {
        const found = /http:\/\/\S+/.exec(line);
        if (found) resolve(found[0].replace(/\/$/, ""));
        else reject(new Error(`the daemon says: ${line}`));
      });
      child.once("exit", (code) => reject(new Error(`the daemon has ended with ${code}`)));
    });
    this.port = Number(new URL(this.url).port);
    await until("every sink to be connected", async () => (await fetch(`${this.url}/ready`)).ok);
  }

  /** Kills it as a power cut would. */
  async kill(): Promise<void> {
    const child = this.#child;
    this.#child = null;
    if (!child || child.exitCode !== null) return;
    const ended = new Promise((resolve) => child.once("exit", resolve));
    child.kill("SIGKILL");
    await ended;
  }

  /** Seconds of processor time that the daemon has taken so far; what it does counts the same
   * however loaded the machine is. */
  processor_s(): number {
    const stat = readFileSync(`/proc/${this.#child?.pid ?? 0}/stat`, "utf8");
    const fields = stat.slice(stat.lastIndexOf(")") + 2).split(" ");
    return (Number(fields[11]) + Number(fields[12])) / 100;
  }

  /** Rehearses a sequence on the sink `left` and keeps its record among the daemon's. */
  async keepRehearsal(sequence: string, folder: string): Promise<void> {
    const file = join(this.folder, `${folder}.json`);
    writeFileSync(file, sequence);
    const bench = join(this.folder, "bench.toml");
    const record = join(this.folder, "records", folder);
    const child = spawn(PROGRAM, ["rehearse", file, "--sink", "left", "--dut", "K-01", "--bench", bench, "--keep", record], {
      stdio: ["ignore", "ignore", "inherit"],
    });
    const code = await new Promise((resolve) => child.once("exit", resolve));
    if (code !== 0) throw new Error(`the rehearsal has ended with ${String(code)}`);
  }

  async close(): Promise<void> {
    await this.kill();
    rmSync(this.folder, { recursive: true, force: true });
  }

  async get<T>(path: string): Promise<T> {
    const answer = await fetch(this.url + path);
    if (!answer.ok) throw new Error(`${path}: ${answer.status} ${await answer.text()}`);
    return (await answer.json()) as T;
  }

  async post<T>(path: string, body?: unknown): Promise<T> {
    const init: RequestInit = { method: "POST" };
    if (body !== undefined) {
      init.headers = { "Content-Type": "application/json" };
      init.body = JSON.stringify(body);
    }
    const answer = await fetch(this.url + path, init);
    if (!answer.ok) throw new Error(`${path}: ${answer.status} ${await answer.text()}`);
    return (await answer.json()) as T;
  }
}

/** Waits until something is so. */
export async function until(what: string, is: () => Promise<boolean> | boolean, most_s = 60): Promise<void> {
  const end = performance.now() + most_s * 1000;
  let trouble: unknown;
  while (performance.now() < end) {
    try {
      if (await is()) return;
      trouble = undefined;
    } catch (error) {
      trouble = error;
    }
    await new Promise((resolve) => setTimeout(resolve, 25));
  }
  throw new Error(`waited ${most_s} s for ${what}${trouble ? `: ${String(trouble)}` : ""}`);
}

let browser: Promise<Browser> | null = null;

export function theBrowser(): Promise<Browser> {
  const path = process.env["CHROMIUM"] ?? BROWSERS.find(existsSync);
  if (!path) throw new Error("no chromium; to mend: apt-get install chromium");
  browser ??= chromium.launch({
    executablePath: path,
    args: [
      "--no-sandbox",
      "--disable-gpu",
      "--disable-quic",
      "--no-first-run",
      "--disable-background-networking",
      "--disable-component-update",
      "--disable-sync",
      "--enable-precise-memory-info",
      "--js-flags=--expose-gc",
    ],
  });
  return browser;
}

export async function closeBrowser(): Promise<void> {
  await (await browser)?.close();
  browser = null;
}

export interface Sitting {
  context: BrowserContext;
  page: Page;
  /** Errors and warnings of the console, and requests to any other host. */
  complaints: string[];
}

interface Look {
  size?: { width: number; height: number };
  dark?: boolean;
}

/** Opens the page as someone would. */
export async function sit(daemon: Daemon, look: Look = {}): Promise<Sitting> {
  const size = look.size ?? DESKTOP;
  const isPhone = size.width < 500;
  const context = await (await theBrowser()).newContext({
    viewport: size,
    deviceScaleFactor: isPhone ? 2 : 1,
    hasTouch: isPhone,
    isMobile: isPhone,
    colorScheme: look.dark ? "dark" : "light",
    timezoneId: "UTC",
  });
  const page = await context.newPage();
  page.setDefaultTimeout(30_000);
  const complaints: string[] = [];
  page.on("console", (message) => {
    if (["error", "warning"].includes(message.type())) complaints.push(`${message.type()}: ${message.text()}`);
  });
  page.on("pageerror", (error) => complaints.push(`thrown: ${error.message}`));
  page.on("request", (request) => {
    const { protocol, origin } = new URL(request.url());
    if (!["blob:", "data:"].includes(protocol) && origin !== new URL(daemon.url).origin) {
      complaints.push(`a request to ${request.url()}`);
    }
  });
  await servedFrom(page, daemon);
  await page.goto(daemon.url);
  await page.getByRole("article").first().waitFor();
  return { context, page, complaints };
}

/** For whoever works on the page: with PAGE_DIST=dist the page's own files come from there, so
 * that the daemon need not be built anew for each change. */
async function servedFrom(page: Page, daemon: Daemon): Promise<void> {
  const dist = process.env["PAGE_DIST"];
  if (!dist) return;
  await page.route(`${daemon.url}/`, (route) => route.fulfill({ path: join(dist, "index.html") }));
  await page.route(`${daemon.url}/page/*`, (route) =>
    route.fulfill({ path: join(dist, new URL(route.request().url()).pathname.replace("/page/", "")) }),
  );
}

/** Keeps a picture of the page under target/page. */
export async function picture(page: Page, name: string, fullPage = true): Promise<void> {
  mkdirSync(PICTURES, { recursive: true });
  await page.evaluate(() => window.scrollTo(0, 0));
  await page.screenshot({ path: join(PICTURES, `${name}.png`), fullPage });
}

const axeSource = readFileSync(createRequire(import.meta.url).resolve("axe-core/axe.min.js"), "utf8");

/** What axe finds wrong. */
export async function violations(page: Page): Promise<string[]> {
  // The page's own policy lets no script in: it is evaluated from outside.
  await page.evaluate(axeSource);
  return page.evaluate(async () => {
    interface Axe {
      run(): Promise<{ violations: { id: string; help: string; nodes: { html: string; failureSummary?: string }[] }[] }>;
    }
    const found = await (window as unknown as { axe: Axe }).axe.run();
    return found.violations.map(
      ({ id, help, nodes }) => `${id}: ${help}: ${nodes.map(({ html, failureSummary }) => `${html} ${failureSummary ?? ""}`).join(" | ")}`,
    );
  });
}

export const sequenceFile = (name: string): string => readFileSync(join(ROOT, "sequences", name), "utf8");
