import { PNG } from "pngjs";
import { describe, expect, test } from "vitest";
import { crc32, encodePng } from "../../src/writers/png.js";
import { pngChunks, pngTexts } from "./png-chunks.js";

/** A view that does not start at the beginning of its memory, as pooled buffers do. */
function shifted<T extends Uint8Array | Uint16Array>(values: T): T {
  const larger = new (values.constructor as { new (length: number): T })(values.length + 6);
  larger.set(values, 3);
  return larger.subarray(3, 3 + values.length) as T;
}

describe("pixels come back exactly, from a view with a byte offset, odd and even sizes", () => {
  test.each([
    [5, 3],
    [4, 6],
    [1, 1],
  ])("8-bit grey %i x %i", (width, height) => {
    const pixels = shifted(Uint8Array.from({ length: width * height }, (_, i) => (i * 37) % 256));
    const png = encodePng({ width, height, colour: "grey", pixels });
    const read = PNG.sync.read(Buffer.from(png));
    expect([read.width, read.height]).toEqual([width, height]);
    expect(Uint8Array.from(pixels, (_, i) => read.data[4 * i] ?? -1)).toEqual(pixels.slice());
    // IHDR: width, height, bit depth 8, colour type 0
    expect(pngChunks(png)[0]?.data.subarray(8, 10)).toEqual(Buffer.from([8, 0]));
  });

  test("16-bit grey", () => {
    const pixels = shifted(Uint16Array.from({ length: 15 }, (_, i) => (i * 4369 + 258) % 65536));
    const png = encodePng({ width: 5, height: 3, colour: "grey", pixels });
    const read = PNG.sync.read(Buffer.from(png), { skipRescale: true } as object); // an option that its types lack
    const samples = new Uint16Array(read.data.buffer, read.data.byteOffset, 60);
    expect(Uint16Array.from(pixels, (_, i) => samples[4 * i] ?? 0)).toEqual(pixels.slice());
    expect(pngChunks(png)[0]?.data.subarray(8, 10)).toEqual(Buffer.from([16, 0]));
  });

  test("8-bit RGB", () => {
    const pixels = shifted(Uint8Array.from({ length: 3 * 4 * 5 }, (_, i) => (i * 11) % 256));
    const png = encodePng({ width: 4, height: 5, colour: "rgb", pixels });
    const read = PNG.sync.read(Buffer.from(png));
    const rgb = Uint8Array.from(pixels, (_, i) => read.data[4 * Math.floor(i / 3) + (i % 3)] ?? 0);
    expect(rgb).toEqual(pixels.slice());
    expect(pngChunks(png)[0]?.data.subarray(8, 10)).toEqual(Buffer.from([8, 2]));
  });
});

const pixels = new Uint8Array(6);
const grey = { width: 3, height: 2, colour: "grey", pixels } as const;

test("the CRC is that of the PNG standard", () => {
  // published check value of CRC-32 (the digits 1 to 9), and the CRC of every PNG's last chunk
  expect(crc32(Buffer.from("123456789"))).toBe(0xcbf43926);
  expect(crc32(Buffer.from("IEND"))).toBe(0xae426082);
  const chunks = pngChunks(encodePng(grey, { pixelMm: { x: 1, y: 1 }, texts: { Title: "a" } }));
  expect(chunks.map((chunk) => crc32(chunk.body))).toEqual(chunks.map((chunk) => chunk.crc));
});

test("the pixel size stands in pHYs as whole pixels per metre, and exactly in a text; both before the pixels", () => {
  const png = encodePng(grey, { pixelMm: { x: 0.9375, y: 1.25 } });
  const types = pngChunks(png).map((chunk) => chunk.type);
  expect(types).toEqual(["IHDR", "pHYs", "tEXt", "tEXt", "IDAT", "IEND"]);
  // 1000 / 0.9375 = 1066.67 -> 1067; 1000 / 1.25 = 800; unit 1, the metre
  const physical = pngChunks(png)[1]?.data;
  expect([physical?.readUInt32BE(0), physical?.readUInt32BE(4), physical?.[8]]).toEqual([1067, 800, 1]);
  expect(pngTexts(png)["Pixel size (mm)"]).toBe("x 0.9375, y 1.25");
});

test("the caution is in every picture, beside the texts given", () => {
  const disclaimer = "Research use only; not for diagnosis.";
  expect(pngTexts(encodePng(grey))).toEqual({ Disclaimer: disclaimer });
  expect(pngTexts(encodePng(grey, { texts: { Title: "Kopf 20°" } }))).toEqual({
    Title: "Kopf 20°",
    Disclaimer: disclaimer,
  });
});

test("text beyond Latin-1 is kept as UTF-8", () => {
  const chunk = pngChunks(encodePng(grey, { texts: { Title: "頭部" } })).find(({ type }) => type === "iTXt");
  expect(chunk?.data.toString("utf8")).toBe("Title\0\0\0\0\0頭部");
});

test("pixels that do not fill the picture, and keywords that PNG forbids, are refused", () => {
  expect(() => encodePng({ ...grey, width: 4 })).toThrow("needs 8 samples, have 6");
  expect(() => encodePng({ width: 0, height: 2, colour: "grey", pixels: new Uint8Array(0) })).toThrow(
    RangeError,
  );
  expect(() => encodePng(grey, { texts: { " x": "a" } })).toThrow("not a PNG keyword");
  expect(() => encodePng(grey, { texts: { ["k".repeat(80)]: "a" } })).toThrow("not a PNG keyword");
});
