/** The chunks of a PNG, read without the writer's library. */
export function pngChunks(png: Uint8Array): { type: string; data: Buffer; crc: number; body: Buffer }[] {
  const bytes = Buffer.from(png);
  const chunks = [];
  for (let at = 8; at < bytes.length; ) {
    const length = bytes.readUInt32BE(at);
    const body = bytes.subarray(at + 4, at + 8 + length); // what the CRC covers
    const crc = bytes.readUInt32BE(at + 8 + length);
    chunks.push({ type: body.toString("latin1", 0, 4), data: body.subarray(4), crc, body });
    at += 12 + length;
  }
  return chunks;
}

/** Keyword to text of the tEXt chunks. */
export function pngTexts(png: Uint8Array): Record<string, string> {
  const texts = pngChunks(png).filter((chunk) => chunk.type === "tEXt");
  return Object.fromEntries(texts.map(({ data }) => data.toString("latin1").split("\0") as [string, string]));
}
