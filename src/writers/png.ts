import { PNG } from "pngjs";

/** A picture in memory: rows from the top, pixels from the left; colour as red, green, blue interleaved. */
export type Picture = { readonly width: number; readonly height: number } & (
  | { readonly colour: "grey"; readonly pixels: Uint8Array | Uint16Array }
  | { readonly colour: "rgb"; readonly pixels: Uint8Array }
);

export interface PngOptions {
  /** Size of one pixel of this picture in millimetres. */
  readonly pixelMm?: { readonly x: number; readonly y: number };
  /** Text that travels with the picture, by keyword: Latin-1, 1 to 79 characters. */
  readonly texts?: Readonly<Record<string, string>>;
}

/** Stands in every picture and chart. */
export const CAUTION = "Research use only; not for diagnosis.";

/**
 * Encode a picture as PNG: grey of 8 or 16 bits, or RGB of 8 bits. The caution is added to the texts, and the pixel
 * size twice: pHYs holds whole pixels per metre only, so the text "Pixel size (mm)" has the exact numbers.
 * The compressed bytes differ between builds of zlib: compare pixels, not files.
 * Source: W3C, Portable Network Graphics Specification; chunks pHYs, tEXt, iTXt.
 * @throws RangeError where the pixels do not fill the picture
 */
export function encodePng(picture: Picture, options: PngOptions = {}): Uint8Array {
  const { width, height, colour, pixels } = picture;
  const needed = width * height * (colour === "rgb" ? 3 : 1);
  if (pixels.length !== needed || needed === 0) {
    throw new RangeError(`${width} x ${height} ${colour} needs ${needed} samples, have ${pixels.length}`);
  }
  // pngjs ignores byteOffset: it must be given a buffer that starts at 0, so a copy in memory of its own.
  const samples = pixels.slice();
  const image = new PNG({ width, height });
  image.data = Buffer.from(samples.buffer);
  const colorType = colour === "rgb" ? 2 : 0;
  const bitDepth = samples.BYTES_PER_ELEMENT === 2 ? 16 : 8;
  const plain = PNG.sync.write(image, {
    colorType,
    inputColorType: colorType,
    bitDepth,
    inputHasAlpha: false,
    filterType: 4, // Paeth for every row: trying all filters takes five times as long and saves a few per cent
    deflateLevel: 6,
  });
  const headEnd = 33; // signature 8, IHDR 25: our chunks stand between it and the pixels
  return Buffer.concat([plain.subarray(0, headEnd), ...metadata(options), plain.subarray(headEnd)]);
}

function metadata({ pixelMm, texts = {} }: PngOptions): Buffer[] {
  const chunks: Buffer[] = [];
  const allTexts: Record<string, string> = { ...texts, Disclaimer: CAUTION };
  if (pixelMm) {
    const physical = Buffer.alloc(9);
    physical.writeUInt32BE(Math.round(1000 / pixelMm.x), 0);
    physical.writeUInt32BE(Math.round(1000 / pixelMm.y), 4);
    physical[8] = 1; // the unit is the metre
    chunks.push(chunk("pHYs", physical));
    allTexts["Pixel size (mm)"] = `x ${pixelMm.x}, y ${pixelMm.y}`;
  }
  for (const [keyword, text] of Object.entries(allTexts)) chunks.push(textChunk(keyword, text));
  return chunks;
}

/** tEXt where Latin-1 can hold the text, else iTXt (UTF-8, not compressed, no language). */
function textChunk(keyword: string, text: string): Buffer {
  if (!/^[\x21-\x7e](?:[\x20-\x7e]{0,77}[\x21-\x7e])?$/.test(keyword)) {
    throw new RangeError(`${JSON.stringify(keyword)} is not a PNG keyword`);
  }
  const clean = text.replaceAll("\0", "");
  const isLatin1 = [...clean].every((character) => (character.codePointAt(0) ?? 0) < 256);
  if (isLatin1) return chunk("tEXt", Buffer.from(`${keyword}\0${clean}`, "latin1"));
  return chunk("iTXt", Buffer.from(`${keyword}\0\0\0\0\0${clean}`, "utf8"));
}

function chunk(type: string, data: Buffer): Buffer {
  const bytes = Buffer.alloc(data.length + 12);
  bytes.writeUInt32BE(data.length, 0);
  bytes.write(type, 4, "latin1");
  data.copy(bytes, 8);
  bytes.writeUInt32BE(crc32(bytes.subarray(4, 8 + data.length)), 8 + data.length);
  return bytes;
}

/** The CRC of PNG (ISO 3309, reflected polynomial EDB88320); bit by bit, for our chunks are short. */
export function crc32(bytes: Uint8Array): number {
  let crc = 0xffffffff;
  for (const byte of bytes) {
    crc ^= byte;
    for (let bit = 0; bit < 8; bit++) crc = crc & 1 ? (crc >>> 1) ^ 0xedb88320 : crc >>> 1;
  }
  return ~crc >>> 0;
}
