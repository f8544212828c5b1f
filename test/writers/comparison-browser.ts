import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { pathToFileURL } from "node:url";
import type { Browser, BrowserContextOptions, Page } from "playwright-core";
import { afterAll, afterEach, beforeAll, beforeEach, expect } from "vitest";
import { comparisonPage } from "../../src/writers/comparison-page.js";
import { launchBrowser } from "./browser.js";
import { sample } from "./comparison-sample.js";

let browser: Browser;
let folder: string;
/** The page of the sample, opened from disk before every test. */
export let page: Page;
/** What must not be: messages on the console, errors in the page, requests beside the file itself. */
export let complaints: string[];

/** Open a page from disk before each test of the file that calls this; after it nothing must be left to complain of. */
export function openBeforeEach(): void {
  beforeAll(async () => {
    browser = await launchBrowser();
    folder = mkdtempSync(join(tmpdir(), "comparison-page-"));
  });
  afterAll(async () => {
    await browser?.close();
    if (folder) rmSync(folder, { recursive: true });
  });
  beforeEach(() => open());
  afterEach(async () => {
    expect(complaints).toEqual([]);
    await page.context().close();
  });
}

/** Open other data, or with other options, in place of the page that is open. */
export async function reopen(data = sample(), options: BrowserContextOptions = {}): Promise<void> {
  await page.context().close();
  await open(data, options);
}

async function open(data = sample(), options: BrowserContextOptions = {}): Promise<void> {
  const file = join(folder, "compare.html");
  writeFileSync(file, comparisonPage(data));
  const url = pathToFileURL(file).href;
  const context = await browser.newContext({ viewport: { width: 1280, height: 900 }, ...options });
  page = await context.newPage();
  complaints = [];
  page.on("console", (message) => complaints.push(`console: ${message.text()}`));
  page.on("pageerror", (error) => complaints.push(`error: ${error.message}`));
  page.on("request", (request) => {
    if (request.url() !== url && !request.url().startsWith("data:")) complaints.push(`asks ${request.url()}`);
  });
  await page.goto(url);
}
