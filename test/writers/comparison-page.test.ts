import { PNG } from "pngjs";
import { describe, expect, test } from "vitest";
import { openBeforeEach, page, reopen } from "./comparison-browser.js";
import { flatPng, sample } from "./comparison-sample.js";

openBeforeEach();

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

  test("follows a finger on the knob and a tap; a finger drawn over the images scrolls", async () => {
    await reopen(sample(), { viewport: { width: 390, height: 844 }, hasTouch: true });
    await page.locator("#images").scrollIntoViewIfNeeded();
    const box = (await page.locator("#images").boundingBox())!;
    const at = (share: number) => box.x + share * box.width;
    await page.touchscreen.tap(at(0.2), box.y + 30);
    expect(await dividerPercent()).toBeCloseTo(20, 0);

    await knob().scrollIntoViewIfNeeded();
    const grip = (await knob().boundingBox())!;
    await drawFinger([grip.x + grip.width / 2, grip.y + 10], [at(0.9), grip.y + 10]);
    expect(await dividerPercent()).toBeCloseTo(90, 0);

    const before: number = await page.evaluate("scrollY");
    const there = (await page.locator("#images").boundingBox())!;
    await drawFinger([at(0.4), there.y + 100], [at(0.4), there.y - 100]);
    await page.waitForFunction(`scrollY > ${before}`);
    expect(await dividerPercent()).toBeCloseTo(90, 0);
  });
});

async function drawFinger(from: readonly [number, number], to: readonly [number, number]): Promise<void> {
  const session = await page.context().newCDPSession(page);
  const steps = 8;
  for (let i = 0; i <= steps; i++) {
    const [x, y] = [0, 1].map((axis) => from[axis]! + ((to[axis]! - from[axis]!) * i) / steps) as [
      number,
      number,
    ];
    await session.send("Input.dispatchTouchEvent", {
      type: i === 0 ? "touchStart" : "touchMove",
      touchPoints: [{ x, y }],
    });
  }
  await session.send("Input.dispatchTouchEvent", { type: "touchEnd", touchPoints: [] });
}

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

  test("shows the scale of differences that bear none themselves", async () => {
    expect(await page.locator(".scale").count()).toBe(0);
    await reopen(sample({ differenceLimit: 0.25 }));
    expect(await page.locator(".scale span").allTextContents()).toEqual(["−0.25", "+0.25"]);
    const { data, width } = PNG.sync.read(await page.locator(".scale svg").screenshot());
    const at = (share: number) => [...data.subarray(4 * (5 * width + Math.round(share * width)))].slice(0, 3);
    const [[, , lowBlue], middle, [highRed, , highBlue]] = [at(0.05), at(0.5), at(0.95)];
    expect(Math.min(...middle!)).toBeGreaterThan(240); // white, or one of 64 steps beside it
    expect(lowBlue).toBeGreaterThan(120); // blue is low, orange is high
    expect(highRed).toBeGreaterThan(120);
    expect(highBlue).toBeLessThan(60);
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
    const data = sample();
    const wide = Buffer.from(flatPng(9));
    wide.writeUInt32BE(80, 16); // the width in the header
    await reopen({
      ...data,
      variants: data.variants.map((each, v) => (v === 3 ? { ...each, image: wide } : each)),
    });
    await page.getByLabel("B, right").selectOption("3");
    expect(await page.locator("#shapes").isVisible()).toBe(true);
  });

  test("one variant alone is shown on both sides", async () => {
    const data = sample();
    await reopen({ ...data, variants: data.variants.slice(0, 1) });
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
