import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { pathToFileURL } from "node:url";
import type { Browser, BrowserContextOptions, Page } from "playwright-core";
import { PNG } from "pngjs";
import { afterAll, afterEach, beforeAll, beforeEach, describe, expect, test } from "vitest";
import { comparisonPage } from "../../src/writers/comparison-page.js";
import { launchBrowser } from "./browser.js";
import { AWKWARD, flatPng, sample } from "./comparison-sample.js";

let browser: Browser;
let folder: string;
let page: Page;
/** What must not be: messages on the console, errors in the page, requests beside the file itself. */
let complaints: string[];

beforeAll(async () => {
  browser = await launchBrowser();
  folder = mkdtempSync(join(tmpdir(), "comparison-page-"));
});
afterAll(async () => {
  await browser?.close();
  if (folder) rmSync(folder, { recursive: true });
});

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

beforeEach(() => open());
afterEach(async () => {
  expect(complaints).toEqual([]);
  await page.context().close();
});

/** The variants in the order of the table's rows, by their place in the data. */
const rowOrder = () =>
  page.locator("#numbers tbody tr").evaluateAll((rows) => rows.map((row) => row.dataset.variant));
const heading = (name: RegExp) => page.locator("#numbers thead th").filter({ hasText: name });
const sortBy = (name: RegExp) => heading(name).getByRole("button").click();
const knob = () => page.getByRole("slider");
const dividerPercent = async () => Number(await knob().getAttribute("aria-valuenow"));

/** The grey level on the screen at a share of the pair's width. */
async function levelAt(share: number): Promise<number> {
  const { data, width, height } = PNG.sync.read(await page.locator("#images").screenshot());
  const x = Math.min(width - 1, Math.round(share * width));
  return data[4 * (Math.floor(height / 4) * width + x)] ?? Number.NaN;
}

describe("the table", () => {
  test("sorts numbers as numbers, missing ones last: upward, downward, as it was", async () => {
    await sortBy(/Resolution/);
    expect(await rowOrder()).toEqual(["3", "0", "1", "2"]);
    expect(await heading(/Resolution/).getAttribute("aria-sort")).toBe("ascending");
    await sortBy(/Resolution/);
    expect(await rowOrder()).toEqual(["1", "0", "3", "2"]);
    expect(await heading(/Resolution/).getAttribute("aria-sort")).toBe("descending");
    await sortBy(/Resolution/);
    expect(await rowOrder()).toEqual(["0", "1", "2", "3"]);
    expect(await page.locator("[aria-sort]").count()).toBe(0);
  });

  test("puts negative values first, infinite ones before what is not a number", async () => {
    await sortBy(/SNR$/);
    expect(await rowOrder()).toEqual(["2", "1", "0", "3"]);
    await sortBy(/PSNR/);
    expect(await rowOrder()).toEqual(["2", "1", "0", "3"]);
    await sortBy(/PSNR/);
    expect(await rowOrder()).toEqual(["0", "1", "2", "3"]);
    expect(await page.locator("[aria-sort]").count()).toBe(1);
  });

  test("sorts by name, and by the keyboard", async () => {
    await heading(/Variant/)
      .getByRole("button")
      .focus();
    await page.keyboard.press("Enter");
    expect(await rowOrder()).toEqual(["2", "1", "0", "3"]);
    await page.keyboard.press("Space");
    expect(await rowOrder()).toEqual(["3", "0", "1", "2"]);
    expect(await page.locator("#said").textContent()).toBe("Sorted by Variant, descending.");
  });

  test("shows values of one column with the same decimals, and what is missing as such", async () => {
    const column = (c: number) => page.locator(`#numbers tbody tr td:nth-of-type(${c})`).allInnerTexts();
    expect((await column(2)).map((text) => text.replace(/\s*none$/, ""))).toEqual([
      "9.50",
      "10.25",
      "–",
      "2.00",
    ]);
    expect(await column(3)).toEqual(["100", "20", "−3", "1000"]);
  });
});

describe("the divider", () => {
  test("stands in the middle: A left of it, B right of it", async () => {
    expect(await dividerPercent()).toBe(50);
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([40, 120]);
  });

  test("follows the mouse, from the images and from the knob", async () => {
    const box = (await page.locator("#images").boundingBox())!;
    const at = (share: number) => box.x + share * box.width;
    await page.mouse.move(at(0.5), box.y + 20);
    await page.mouse.down();
    await page.mouse.move(at(0.8), box.y + 40, { steps: 4 });
    await page.mouse.up();
    expect(await dividerPercent()).toBeCloseTo(80, 0); // a pixel of the screen is 0.15 %
    expect([await levelAt(0.7), await levelAt(0.9)]).toEqual([40, 120]);

    await knob().scrollIntoViewIfNeeded();
    const grip = (await knob().boundingBox())!;
    await page.mouse.move(grip.x + grip.width / 2, grip.y + grip.height / 2);
    await page.mouse.down();
    await page.mouse.move(at(0.1), grip.y, { steps: 4 });
    await page.mouse.move(at(0.3), grip.y, { steps: 4 });
    await page.mouse.up();
    await page.mouse.move(at(0.6), grip.y); // let go: no longer followed
    expect(await dividerPercent()).toBeCloseTo(30, 0);
    expect([await levelAt(0.25), await levelAt(0.35)]).toEqual([40, 120]);
  });

  test("follows the keys, and stops at the ends", async () => {
    await knob().focus();
    for (const [key, percent] of [
      ["ArrowRight", 51],
      ["ArrowUp", 52],
      ["ArrowLeft", 51],
      ["ArrowDown", 50],
      ["Shift+ArrowLeft", 40],
      ["PageUp", 50],
      ["PageDown", 40],
      ["End", 100],
      ["ArrowRight", 100],
      ["Home", 0],
      ["ArrowLeft", 0],
      ["Shift+ArrowRight", 10],
    ] as const) {
      await page.keyboard.press(key);
      expect(await dividerPercent(), key).toBe(percent);
    }
    expect([await levelAt(0.05), await levelAt(0.15)]).toEqual([40, 120]);
    expect(await knob().getAttribute("aria-valuetext")).toBe("10 % A, 90 % B");
  });

  test("goes to the ends by buttons", async () => {
    await page.getByRole("button", { name: "Only A" }).click();
    expect([await levelAt(0.02), await levelAt(0.95)]).toEqual([40, 40]);
    await page.getByRole("button", { name: "Only B" }).click();
    expect([await levelAt(0.02), await levelAt(0.95)]).toEqual([120, 120]);
  });

  test("moves by a tap, while a finger drawn over the images scrolls", async () => {
    await page.context().close();
    await open(sample(), { viewport: { width: 390, height: 844 }, hasTouch: true });
    await page.locator("#images").scrollIntoViewIfNeeded();
    const box = (await page.locator("#images").boundingBox())!;
    await page.touchscreen.tap(box.x + 0.2 * box.width, box.y + 30);
    expect(await dividerPercent()).toBeCloseTo(20, 0);
  });
});

describe("the choice of the pair", () => {
  test("by list", async () => {
    await page.getByLabel("B, right").selectOption("3");
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([40, 250]);
    expect(await page.locator("#against tbody tr:nth-child(2) td").allInnerTexts()).toEqual(["100", "1000"]);
    expect(await page.locator("#difference-b figcaption").textContent()).toBe(
      "B: apodize.window=tukey:0.5 minus apodize.window=none",
    );
  });

  test("by the rows of the table, also when sorted", async () => {
    await sortBy(/Resolution/);
    await page.getByRole("button", { name: "Show apodize.window=tukey:0.5 as A" }).click();
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([250, 120]);
    expect(await page.getByLabel("A, left").inputValue()).toBe("3");
    const pressed = page.locator("button[data-side='a'][aria-pressed='true']");
    expect(await pressed.evaluateAll((buttons) => buttons.map((button) => button.dataset.variant))).toEqual([
      "3",
    ]);
    expect(await page.locator("#against tbody tr:nth-child(2) td").allInnerTexts()).toEqual(["1000", "20"]);
  });

  test("a variant that the other side shows changes places", async () => {
    await page.getByLabel("A, left").selectOption("1");
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([120, 40]);
    await page.getByRole("button", { name: "Swap A and B" }).click();
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([40, 120]);
  });

  test("shows the difference of each, and says that the reference has none", async () => {
    const source = (selector: string) => page.locator(selector).getAttribute("src");
    expect(await page.locator("#difference-a img").isVisible()).toBe(false);
    expect(await page.locator("#difference-a figcaption").textContent()).toMatch(/is the reference/);
    expect(await source("#difference-b img")).toBe(await source("#variant-1 img.difference"));
  });

  test("states the grey range, and smooths pixels only when told", async () => {
    expect(await page.locator("#pair").textContent()).toContain(
      "black 0, white 1.25 (99.5th percentile of the foreground)",
    );
    const rendering = () =>
      page
        .locator(".left img")
        .evaluate((image) => image.ownerDocument.defaultView.getComputedStyle(image).imageRendering);
    expect(await rendering()).toBe("pixelated");
    await page.getByLabel("Pixels as squares").uncheck();
    expect(await rendering()).toBe("auto");
  });

  test("a whole size makes every pixel as many pixels of the screen", async () => {
    await page.getByLabel("Size").selectOption("3");
    const box = (await page.locator(".left img").boundingBox())!;
    expect([box.width, box.height]).toEqual([120, 90]);
  });

  test("says when A and B differ in shape", async () => {
    expect(await page.locator("#shapes").isVisible()).toBe(false);
    await page.context().close();
    const data = sample();
    const wide = Buffer.from(flatPng(9));
    wide.writeUInt32BE(80, 16); // the width in the header
    await open({
      ...data,
      variants: data.variants.map((each, v) => (v === 3 ? { ...each, image: wide } : each)),
    });
    await page.getByLabel("B, right").selectOption("3");
    expect(await page.locator("#shapes").isVisible()).toBe(true);
  });

  test("one variant alone is shown on both sides", async () => {
    await page.context().close();
    const data = sample();
    await open({ ...data, variants: data.variants.slice(0, 1) });
    expect([await levelAt(0.25), await levelAt(0.75)]).toEqual([40, 40]);
  });
});

describe("a recipe", () => {
  const recipe = sample().variants[1]!.recipe;
  const copy = () => page.getByRole("button", { name: "Copy the recipe of apodize.window=hann" }).click();

  test("is copied exactly", async () => {
    await page.context().grantPermissions(["clipboard-read", "clipboard-write"]);
    await copy();
    await page.locator("#variant-1 .copied").filter({ hasText: "Copied." }).waitFor();
    expect(await page.evaluate("navigator.clipboard.readText()")).toBe(recipe);
  });

  test.each([
    ["refuses", "navigator.clipboard.writeText = () => Promise.reject(new Error('refused'))"],
    ["knows no clipboard", "Object.defineProperty(navigator, 'clipboard', { value: undefined })"],
  ])("is unfolded and selected where the browser %s", async (_, script) => {
    await page.evaluate(script);
    await copy();
    await page.locator("#variant-1 .copied").filter({ hasText: "Selected" }).waitFor();
    // The browser's text of a selection lacks the line feed at its end, which YAML does not need.
    expect(await page.evaluate("getSelection().toString()")).toBe(recipe.trimEnd());
    expect(await page.locator("#variant-1 pre").isVisible()).toBe(true);
  });
});

describe("every reader", () => {
  test("by keyboard: Tab reaches every control, each with a name", async () => {
    const reached = new Set<string>();
    const describeFocus = `(() => {
      const { tagName, id, className, dataset, textContent, ariaLabel, labels } = document.activeElement;
      const name = ariaLabel ?? (labels?.[0]?.textContent || textContent);
      return tagName === "BODY" ? "" : [tagName, id, className, dataset.side, dataset.variant, name.trim()].join(" ");
    })()`;
    for (let i = 0; i < 200; i++) {
      await page.keyboard.press("Tab");
      const focus: string = await page.evaluate(describeFocus);
      if (focus === "" || reached.has(focus)) break;
      expect(focus).toMatch(/\S$/);
      reached.add(focus);
    }
    const controls = await page
      .locator("a, button, select, input, summary, pre, [role=slider], [role=region]")
      .evaluateAll((all) => all.filter((each) => each.checkVisibility()).length);
    const tags = [...reached].map((focus) => focus.split(" ")[0]);
    // Four summaries of one text are one in the set, and the others are told apart by what they do.
    expect(tags).toEqual(expect.arrayContaining(["A", "BUTTON", "SELECT", "INPUT", "SUMMARY", "DIV"]));
    expect(controls).toBeGreaterThan(30);
  });

  test("of another scheme: text stands out from its ground", async () => {
    for (const colorScheme of ["light", "dark"] as const) {
      await page.emulateMedia({ colorScheme });
      const pairs: [string, string][] = await page.evaluate(`(() => {
        const style = getComputedStyle(document.documentElement);
        const value = (name) => style.getPropertyValue(name).trim();
        return [["ink", "page"], ["ink", "card"], ["ink", "stripe"], ["quiet", "card"], ["quiet", "page"], ["a", "card"],
          ["b", "card"], ["on-side", "a"], ["on-side", "b"], ["ink", "caution"]]
          .map((pair) => pair.map((name) => value("--" + name)));
      })()`);
      // Source: W3C, WCAG 2.2, 1.4.3: at least 4.5 for text.
      for (const [text, ground] of pairs)
        expect(contrast(text, ground), `${text} on ${ground}`).toBeGreaterThan(4.5);
    }
  });

  test.each([390, 768, 1280])("at a width of %i: nothing but the table scrolls sideways", async (width) => {
    await page.setViewportSize({ width, height: 900 });
    expect(await page.evaluate("document.documentElement.scrollWidth - innerWidth")).toBeLessThanOrEqual(0);
  });

  test("who wants no motion: none is there", async () => {
    await page.emulateMedia({ reducedMotion: "reduce" });
    expect(await page.evaluate("getComputedStyle(document.documentElement).scrollBehavior")).toBe("auto");
  });

  test("without script: numbers, images, recipes, and no control that does nothing", async () => {
    await page.context().close();
    await open(sample(), { javaScriptEnabled: false });
    expect(await page.locator("#numbers tbody tr").count()).toBe(4);
    expect(await page.locator("#pair").isVisible()).toBe(false);
    expect(await page.locator("#variant-1 img.image").isVisible()).toBe(true);
    expect(await page.getByRole("button", { name: /^(Show|Copy)/ }).count()).toBe(0);
  });

  test("on paper: the caution, both images side by side, recipes unfolded, no controls", async () => {
    await page.emulateMedia({ media: "print", colorScheme: "dark" });
    expect(await page.locator(".caution").isVisible()).toBe(true);
    const left = (await page.locator(".left img").boundingBox())!;
    const right = (await page.locator(".right img").boundingBox())!;
    expect(right.x).toBeGreaterThanOrEqual(left.x + left.width);
    expect([right.y, right.width]).toEqual([left.y, left.width]);
    for (const side of [".left", ".right"]) {
      const clip = await page
        .locator(side)
        .evaluate((each) => each.ownerDocument.defaultView.getComputedStyle(each).clipPath);
      expect(clip).toBe("none");
    }
    for (const pre of await page.locator("pre").all())
      expect((await pre.boundingBox())?.height).toBeGreaterThan(20);
    for (const control of await page
      .locator("select, input, [role=slider], summary, button:not(.sort), nav")
      .all()) {
      expect(await control.isVisible()).toBe(false);
    }
    expect(await page.evaluate("getComputedStyle(document.body).backgroundColor")).toBe("rgb(255, 255, 255)");
  });
});

describe("the document", () => {
  test("shows names as they are, whatever is in them", async () => {
    expect(await page.title()).toBe(`bell ${AWKWARD}.h5: variants compared`);
    expect(await page.locator("h1 .name").textContent()).toBe(`bell ${AWKWARD}.h5`);
    expect(await page.locator("#variant-2 h3").textContent()).toBe(AWKWARD);
    expect(await page.locator("#choose-b option").nth(2).textContent()).toBe(AWKWARD);
    expect(await page.locator("#facts dd").first().textContent()).toBe(`bell ${AWKWARD}.h5`);
    expect(await page.locator("#variant-2 code").textContent()).toBe(sample().variants[2]!.recipe);
    expect(await page.locator("img[onerror]").count()).toBe(0);
    await page.getByLabel("B, right").selectOption("2");
    expect(await page.locator(".right figcaption").textContent()).toBe(`B: ${AWKWARD}`);
  });

  test("lets no other script run, even one that got in", async () => {
    await page.evaluate(
      "document.body.append(Object.assign(document.createElement('script'), { textContent: 'window.gotIn = true' }))",
    );
    expect(await page.evaluate("window.gotIn")).toBeUndefined();
    expect(complaints.filter((each) => each.includes("Content Security Policy"))).toHaveLength(1);
    complaints.length = 0;
  });

  test("is the same for the same data", () => {
    expect(comparisonPage(sample())).toBe(comparisonPage(sample()));
  });

  test("refuses a reference that is no variant, and an image that is no PNG", () => {
    expect(() => comparisonPage(sample({ reference: "other" }))).toThrow(RangeError);
    const [first] = sample().variants;
    expect(() => comparisonPage(sample({ variants: [{ ...first!, image: new Uint8Array(40) }] }))).toThrow(
      "Image of apodize.window=none is not a PNG",
    );
  });
});

/** Contrast ratio of two colours "#rrggbb". Source: W3C, WCAG 2.2, definitions of contrast ratio, relative luminance. */
function contrast(one: string, other: string): number {
  const [dark, light] = [luminance(one), luminance(other)].sort((a, b) => a - b) as [number, number];
  return (light + 0.05) / (dark + 0.05);
}

function luminance(colour: string): number {
  const parts = [1, 3, 5].map((at) => Number.parseInt(colour.slice(at, at + 2), 16) / 255);
  const linear = parts.map((c) => (c <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4));
  return 0.2126 * linear[0]! + 0.7152 * linear[1]! + 0.0722 * linear[2]!;
}
