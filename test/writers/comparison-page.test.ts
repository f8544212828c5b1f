import { existsSync, writeFileSync } from "node:fs";
import path from "node:path";
import { pathToFileURL } from "node:url";
import { type Browser, chromium, type Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { type ComparisonPage, comparisonPage } from "../../src/writers/comparison-page.js";
import { encodePng } from "../../src/writers/png.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("page");
const file = path.join(folder, "compare.html");
const PLACES = [
  process.env.CHROMIUM,
  "/usr/bin/chromium",
  "/usr/bin/chromium-browser",
  "/usr/bin/google-chrome",
];

/** A picture of one grey. */
const grey = (level: number) =>
  encodePng({ width: 64, height: 48, colour: "grey", pixels: new Uint8Array(64 * 48).fill(level) });

const DATA: ComparisonPage = {
  title: `Comparison: a<b> & "c" 'd'.h5`,
  caution: "For research only, not for diagnosis or treatment.",
  facts: [["input", "a<b>.h5"]],
  reference: "window=none",
  columns: [
    { id: "width", label: "width", unit: "mm", describe: "full width" },
    { id: "noise", label: "noise", unit: "", describe: "of the region" },
  ],
  variants: [
    {
      name: "window=none",
      values: { width: 2.25, noise: 1 },
      recipe: "carillon: 1\nstages: [a]\n",
      image: grey(10),
      difference: undefined,
    },
    {
      name: "window=hann",
      values: { width: 10.5, noise: null },
      recipe: "carillon: 1\nstages: [b]\n",
      image: grey(90),
      difference: grey(120),
    },
    {
      name: `<img src=x onerror="fail()">`,
      values: { width: 3.5, noise: 0.25 },
      recipe: "carillon: 1\n# </script><script>fail()</script>\n",
      image: grey(200),
      difference: grey(130),
    },
  ],
  differenceLimit: 2.5,
  greyRange: { black: 0, white: 1, rule: "as given" },
  figures: [
    {
      title: "Edge",
      svg: '<svg xmlns="http://www.w3.org/2000/svg" width="85mm" height="50mm" viewBox="0 0 10 10"><text>mm</text></svg>',
      describe: "across it",
    },
  ],
};

let browser: Browser;
let page: Page;
const faults: string[] = [];
const requests: string[] = [];

beforeAll(async () => {
  const executablePath = PLACES.find((place) => place !== undefined && existsSync(place));
  if (!executablePath)
    throw new Error("no Chromium: install Debian's chromium, or name one in the environment: CHROMIUM=/path");
  writeFileSync(file, comparisonPage(DATA));
  browser = await chromium.launch({ executablePath, args: ["--no-sandbox"] });
  page = await browser.newPage({ viewport: { width: 1000, height: 900 } });
  page.on("console", (message) => faults.push(message.text()));
  page.on("pageerror", (error) => faults.push(error.message));
  page.on("request", (request) => requests.push(request.url()));
  await page.goto(pathToFileURL(file).href);
}, 60_000);
afterAll(() => browser?.close());

const column = (index: number) =>
  page
    .locator("#measures tbody tr")
    .evaluateAll((rows, at) => rows.map((row) => row.children[at]!.textContent), index);
/** Where the upper image is cut off, in shares of its width. */
const split = () => page.locator("#stack").evaluate((stack) => stack.style.getPropertyValue("--split"));

describe("the page of a comparison, in a browser", () => {
  test("the table sorts by numbers, a second time the other way, what is missing last", async () => {
    expect(await column(1)).toEqual(["2.25", "10.5", "3.5"]);
    await page.click("text=width (mm)");
    expect(await column(1)).toEqual(["2.25", "3.5", "10.5"]);
    await page.click("text=width (mm)");
    expect(await column(1)).toEqual(["10.5", "3.5", "2.25"]);
    const head = page.locator("#measures thead th").nth(1);
    expect(await head.getAttribute("aria-sort")).toBe("descending");
    const noise = page.locator("#measures thead button").nth(2);
    await noise.focus();
    await page.keyboard.press("Enter");
    expect(await column(2)).toEqual(["0.25", "1", "–"]);
    await page.keyboard.press("Enter");
    expect(await column(2)).toEqual(["1", "0.25", "–"]);
    expect(await head.getAttribute("aria-sort")).toBe("none");
  });

  test("the divider moves by arrow keys and by dragging in the image, and the cut follows", async () => {
    expect(await split()).toBe("50%");
    await page.focus("#divider");
    for (let i = 0; i < 5; i++) await page.keyboard.press("ArrowRight");
    expect(await split()).toBe("55%");
    const box = (await page.locator("#under").boundingBox())!;
    await page.mouse.move(box.x + 0.55 * box.width, box.y + 20);
    await page.mouse.down();
    await page.mouse.move(box.x + 0.2 * box.width, box.y + 30, { steps: 4 });
    await page.mouse.up();
    expect(Number.parseFloat(await split())).toBeCloseTo(20, -0.5);
    await page.mouse.move(box.x + 0.9 * box.width, box.y + 30);
    expect(Number.parseFloat(await split())).toBeCloseTo(20, -0.5); // let go
    expect(await page.inputValue("#divider")).toBe(String(Number.parseFloat(await split())));
    // What is seen: the left one's grey left of the line, the right one's right of it.
    const shot = await page.locator("#stack").screenshot();
    const { PNG } = (await import("pngjs")).default;
    const png = PNG.sync.read(shot);
    const at = (share: number) =>
      png.data[4 * (Math.floor(png.height / 3) * png.width + Math.floor(share * png.width))];
    expect([at(0.1), at(0.6)]).toEqual([10, 90]);
  });

  test("other variants are chosen, and named", async () => {
    await page.selectOption("#right", "2");
    expect(await page.textContent("#under-name")).toBe(DATA.variants[2]!.name);
    expect(await page.getAttribute("#under", "src")).toContain(Buffer.from(grey(200)).toString("base64"));
    await page.selectOption("#left", { label: "window=hann" });
    expect(await page.getAttribute("#over", "alt")).toBe("window=hann");
  });

  test("a recipe is copied, or selected where the clipboard is out of reach", async () => {
    await page.click("summary >> nth=1");
    await page.click("button.copy >> nth=1");
    const said = await page.waitForSelector("#said:not(:empty)");
    await expect.poll(() => said.textContent()).toMatch(/^Recipe (copied|selected)/);
    if ((await said.textContent())!.startsWith("Recipe selected"))
      expect(await page.evaluate("String(getSelection())")).toBe(DATA.variants[1]!.recipe.trimEnd());
    else {
      await page.context().grantPermissions(["clipboard-read"]);
      expect(await page.evaluate("navigator.clipboard.readText()")).toBe(DATA.variants[1]!.recipe);
    }
  });

  test("on paper: recipes open, both images side by side, no controls, the caution", async () => {
    await page.evaluate("dispatchEvent(new Event('beforeprint'))");
    await page.emulateMedia({ media: "print" });
    expect(await page.locator("#recipe-2").isVisible()).toBe(true);
    expect(await page.locator("#divider").isVisible()).toBe(false);
    expect(await page.locator(".caution").isVisible()).toBe(true);
    const [over, under] = [
      await page.locator("#over").boundingBox(),
      await page.locator("#under").boundingBox(),
    ];
    expect(over!.x + over!.width).toBeLessThanOrEqual(under!.x);
    await page.emulateMedia({ media: "screen" });
    await page.evaluate("dispatchEvent(new Event('afterprint'))");
    expect(await page.locator("#recipe-2").isVisible()).toBe(false);
  });

  test("the keyboard reaches every control", async () => {
    const wanted = await page.locator("button:visible, select, input, summary, .scroll").count();
    await page.focus("body");
    await page.evaluate("document.activeElement.blur()");
    const seen = new Set<string>();
    for (let i = 0; i < wanted + 5; i++) {
      await page.keyboard.press("Tab");
      seen.add(
        await page.evaluate(
          "(document.activeElement.id || document.activeElement.tagName + document.activeElement.textContent)",
        ),
      );
    }
    expect(seen.size).toBeGreaterThanOrEqual(wanted);
  });

  test("text is text: nothing of a name or a recipe becomes markup; no request but the page itself, no fault", async () => {
    expect(await page.textContent("h1")).toBe(DATA.title);
    expect(await page.textContent("#recipe-2")).toBe(DATA.variants[2]!.recipe);
    expect(requests.filter((url) => !url.startsWith("data:"))).toEqual([pathToFileURL(file).href]);
    expect(faults).toEqual([]);
  });

  test("narrow: nothing but the table is wider than the screen", async () => {
    await page.setViewportSize({ width: 360, height: 700 });
    const width = await page.evaluate("document.documentElement.scrollWidth");
    expect(width).toBeLessThanOrEqual(360);
    await page.setViewportSize({ width: 1000, height: 900 });
  });

  test("the same data give the same bytes", () => {
    expect(comparisonPage(DATA)).toBe(comparisonPage(DATA));
  });
});
