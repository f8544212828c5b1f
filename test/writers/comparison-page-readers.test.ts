import { describe, expect, test } from "vitest";
import { comparisonPage } from "../../src/writers/comparison-page.js";
import { complaints, openBeforeEach, page, reopen } from "./comparison-browser.js";
import { AWKWARD, sample } from "./comparison-sample.js";

openBeforeEach();

describe("every reader", () => {
  test("by keyboard: Tab reaches every control, and each has a name", async () => {
    await page.evaluate(
      "window.reached = new Set(); addEventListener('focusin', (event) => reached.add(event.target))",
    );
    const controls = 'a, button, select, input, summary, [tabindex="0"]';
    const count = await page.locator(controls).count();
    for (let i = 0; i < count + 1; i++) await page.keyboard.press("Tab");
    const [visible, missed, nameless]: [number, string[], string[]] = await page.evaluate(`(() => {
      const visible = [...document.querySelectorAll('${controls}')].filter((each) => each.checkVisibility());
      const nameOf = (each) => each.ariaLabel ?? each.labels?.[0]?.textContent ?? each.textContent;
      const markup = (each) => each.outerHTML.slice(0, 200);
      return [
        visible.length,
        visible.filter((each) => !reached.has(each)).map(markup),
        visible.filter((each) => nameOf(each).trim() === "").map(markup),
      ];
    })()`);
    // Links, headings, rows, table and its fold, choosers and size, images, knob, quick buttons, recipes and their folds.
    expect(visible).toBe(5 + 4 + 4 * 2 + 2 + 4 + 1 + 1 + 4 + 4 * 2);
    expect(missed).toEqual([]);
    expect(nameless).toEqual([]);
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
    await reopen(sample(), { javaScriptEnabled: false });
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

test("a browser that prints no folded parts has them unfolded for the time of printing", async () => {
  await page.locator("#variant-1 summary").click();
  const unfolded = () => page.locator("details[open]").count();
  await page.evaluate("dispatchEvent(new Event('beforeprint'))");
  expect(await unfolded()).toBe(5); // four recipes and what the columns say
  await page.evaluate("dispatchEvent(new Event('afterprint'))");
  expect(await unfolded()).toBe(1);
});

describe("the document", () => {
  test("shows names as they are, whatever is in them", async () => {
    expect(await page.title()).toBe(`bell ${AWKWARD}.h5`);
    expect(await page.locator("h1").textContent()).toBe(`bell ${AWKWARD}.h5`);
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
