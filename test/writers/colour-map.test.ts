import { expect, test } from "vitest";
import { divergingColour, signedMapPicture } from "../../src/writers/colour-map.js";
import { pngTexts } from "./png-chunks.js";

/** CIE lightness L* of an sRGB colour (IEC 61966-2-1, D65). */
function lightness(colour: readonly number[]): number {
  const linear = colour.map((level) => {
    const share = level / 255;
    return share <= 0.04045 ? share / 12.92 : ((share + 0.055) / 1.055) ** 2.4;
  });
  const luminance = 0.2126 * (linear[0] ?? 0) + 0.7152 * (linear[1] ?? 0) + 0.0722 * (linear[2] ?? 0);
  return luminance > 216 / 24389 ? 116 * Math.cbrt(luminance) - 16 : (24389 / 27) * luminance;
}

const SHARES = Array.from({ length: 41 }, (_, i) => i / 40);

test("the colours fall in lightness from white, alike on both sides", () => {
  const [positive, negative] = [1, -1].map((sign) =>
    SHARES.map((share) => lightness(divergingColour(sign * share))),
  );
  expect(divergingColour(0)).toEqual([255, 255, 255]);
  SHARES.forEach((share, i) => {
    // 1.5 of 100: between stops the mixture in sRGB is not quite linear in lightness
    expect(Math.abs((positive?.[i] ?? 0) - (negative?.[i] ?? 0))).toBeLessThan(1.5);
    if (i > 0) expect(positive?.[i]).toBeLessThan(positive?.[i - 1] ?? 0);
    if (i > 0) expect(negative?.[i]).toBeLessThan(negative?.[i - 1] ?? 0);
    if (share === 0.5) expect(positive?.[i]).toBeCloseTo(68, 0);
  });
});

test("positive is orange, negative blue, beyond the limit the end colour, no number grey", () => {
  const [orange, blue] = [divergingColour(1), divergingColour(-1)];
  expect(orange[0]).toBeGreaterThan(orange[2] ?? 255);
  expect(blue[2]).toBeGreaterThan(blue[0] ?? 255);
  expect([divergingColour(7), divergingColour(-7)]).toEqual([orange, blue]);
  expect(new Set(divergingColour(Number.NaN)).size).toBe(1);
});

const OPTIONS = { unit: "Hz", pixelMm: { x: 1.5, y: 1.5 } };

/** Number of pixels of a colour, and the place of the first. */
function find(
  { pixels, width }: { pixels: Uint8Array | Uint16Array; width: number },
  colour: readonly number[],
) {
  const found = [];
  for (let at = 0; at < pixels.length; at += 3) {
    if (colour.every((level, channel) => pixels[at + channel] === level)) found.push(at / 3);
  }
  return { count: found.length, x: (found[0] ?? -1) % width, y: Math.floor((found[0] ?? -1) / width) };
}

test("a map [2, 3]: x to the right, y downward, each value in its colour and no other made up", () => {
  const values = [-1, 0.3, 0.6, -0.3, -0.6, 1];
  const { picture } = signedMapPicture(values, 2, 3, { ...OPTIONS, limit: 1 });
  const places = values.map((value) => find(picture, divergingColour(value)));
  const counts = [1, 2, 3, 4].map((i) => places[i]?.count ?? 0); // the others are at the bar's ends too
  expect(Math.min(...counts)).toBeGreaterThan(10000);
  expect(places[2]?.x).toBeGreaterThan(places[1]?.x ?? Infinity);
  expect(places[3]?.y).toBeGreaterThan(places[0]?.y ?? Infinity);
});

test("the limit, if not given, is a round number above nearly all values; those beyond are counted", () => {
  const values = Float32Array.from({ length: 3000 }, (_, i) => 340 * Math.sin(i));
  expect(signedMapPicture(values, 50, 60, OPTIONS)).toMatchObject({ limit: 400, beyondLimit: 0 });
  const float32 = Float32Array.of(0.0003, -0.0003, 0, 0); // 0.0003 is rounded upward there
  expect(signedMapPicture(float32, 2, 2, OPTIONS)).toMatchObject({ limit: 0.0003, beyondLimit: 0 });
  const beyond = signedMapPicture([1, 2, 3, -4, Number.NaN, 0], 2, 3, { ...OPTIONS, limit: 2 });
  expect(beyond.beyondLimit).toBe(2);
  expect(pngTexts(beyond.png)["Colour range"]).toBe("blue -2, white 0, orange 2 Hz; 2 values beyond");
  expect(signedMapPicture(new Float32Array(6), 2, 3, OPTIONS).limit).toBe(1);
});

test("an outline is drawn where the mask ends, and nowhere else", () => {
  const mask = new Uint8Array(30).fill(1, 13, 15); // [5, 6]: two pixels of the middle line, away from the edge
  const plain = signedMapPicture(new Float32Array(30), 5, 6, OPTIONS).picture;
  const outlined = signedMapPicture(new Float32Array(30), 5, 6, { ...OPTIONS, outlineMask: mask }).picture;
  const ink = [34, 34, 34];
  const tile = 68; // 448 wanted x 0.9 / 6 pixels = 67.2, rounded up
  // round two pixels: 6 sides inside, 6 outside, each a tile long; the corners are one pixel less inside
  const drawn = find(outlined, ink).count - find(plain, ink).count;
  expect(drawn).toBe(6 * tile - 4 + 6 * tile);
});

test("what lies outside the outline decides no colours and is not counted", () => {
  const mask = [0, 1, 1, 1, 1, 0];
  const { limit, beyondLimit } = signedMapPicture([9000, 1, -2, 3, 3.9, -700], 2, 3, {
    ...OPTIONS,
    outlineMask: mask,
  });
  expect({ limit, beyondLimit }).toEqual({ limit: 4, beyondLimit: 0 });
});

test("wrong sizes and limits are refused", () => {
  expect(() => signedMapPicture([1, 2, 3], 2, 2, OPTIONS)).toThrow("needs 4 values");
  expect(() => signedMapPicture([1, 2, 3, 4], 2, 2, { ...OPTIONS, outlineMask: [1] })).toThrow(RangeError);
  expect(() => signedMapPicture([1, 2, 3, 4], 2, 2, { ...OPTIONS, limit: 0 })).toThrow("must be above 0");
});
