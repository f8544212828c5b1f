/**
 * A small font of our own on a grid 5 wide: 7 rows above the baseline, 2 below. Glyphs are skeletons: a renderer
 * joins neighbouring grid points with round strokes, so that text stays smooth at any size.
 */

/** Grid rows from the top of a capital to the baseline. */
export const CAP_ROWS = 7;
const ROWS = 9;
const COLUMNS = 5;
/** Grid steps between one glyph and the next. */
const GAP = 1;
const SPACE_ADVANCE = 4;

/** Each entry: the character, then its 9 rows from the top, a row as one base-32 digit whose high bit is at the left. */
const PACKED = [
  "!ggggg0g00 \"kk0000000 #aavavaa00 $4fke5u400 %pp248jj00 &ciiclid00 'gg0000000 (48ggg8400 )g84448g00",
  "*0level000 +044v44000 ,00000088g -000u00000 .000000g00 /122488g00 0ehhhhhe00 14c4444e00 2eh1248v00",
  "3eh161he00 426aiv2200 5vgu11he00 668guhhe00 7v12244400 8ehhehhe00 9ehhf12c00 :00g000g00 ;00800088g",
  "<248g84200 =00v0v0000 >g84248g00 ?eh1240400 @ehnlnge00 Aehhvhhh00 Buhhuhhu00 Cehggghe00 Duhhhhhu00",
  "Evgguggv00 Fvgguggg00 Gehgnhhe00 Hhhhvhhh00 Is88888s00 J1111hhe00 Khikokih00 Lggggggv00 Mhrllhhh00",
  "Nhpllljh00 Oehhhhhe00 Puhhuggg00 Qehhhlid00 Ruhhukih00 Sehge1he00 Tv44444400 Uhhhhhhe00 Vhhhhha400",
  "Whhhllrh00 Xhha4ahh00 Yhha444400 Zv1248gv00 [sgggggs00 \\gg8844200 ]s44444s00 ^4ah000000 _000000v00",
  "a00e1fhf00 bgguhhhu00 c00eggge00 d11fhhhf00 e00ehvge00 f68u888800 g00fhhhf1e hgguhhhh00 ig0ggggg00",
  "j40444444o kggikoki00 lgggggg800 m00qllll00 n00uhhhh00 o00ehhhe00 p00uhhhugg q00fhhhf11 r00moggg00",
  "s00fge1u00 t88u888600 u00hhhhf00 v00hhha400 w00hhlla00 x00ha4ah00 y00hhhhf1e z00v248v00 {688g88600",
  "|ggggggggg }o44244o00 ~009li0000 °ciic00000 ±44v440v00 ²o48s00000 µ00hhhjrgg ×0ha4ah000 Δ04aahhv00",
  "π00vaaaa00 −000v00000",
];

/** Other ways to write the same glyph. */
const SAME: Readonly<Record<string, string>> = {
  "\u03bc": "\u00b5",
  "\u2013": "-",
  "\u2014": "-",
  "\u2019": "'",
  "`": "'",
};

/** A stroke in grid steps: x from the glyph's left, y downward from the top of a capital. A dot has both ends equal. */
export type Stroke = readonly [x0: number, y0: number, x1: number, y1: number];

interface Glyph {
  readonly strokes: readonly Stroke[];
  readonly advance: number;
}

const GLYPHS = new Map(
  PACKED.flatMap((line) => line.split(" ")).map((entry) => [entry[0], glyph(entry)] as const),
);

/** Width of text in grid steps, without the gap after the last glyph. */
export function textSteps(text: string): number {
  const advances = glyphsOf(text).map((each) => each.advance);
  return Math.max(0, advances.reduce((sum, advance) => sum + advance, 0) - GAP);
}

/** The strokes of a line of text, in grid steps from its left end and the top of its capitals. */
export function textStrokes(text: string): Stroke[] {
  const strokes: Stroke[] = [];
  let left = 0;
  for (const { strokes: own, advance } of glyphsOf(text)) {
    for (const [x0, y0, x1, y1] of own) strokes.push([x0 + left, y0, x1 + left, y1]);
    left += advance;
  }
  return strokes;
}

/** The text cut so that it is at most `steps` wide, with dots where something was cut. */
export function fitText(text: string, steps: number): string {
  if (textSteps(text) <= steps) return text;
  const characters = [...text];
  while (characters.length > 0 && textSteps(`${characters.join("")}..`) > steps) characters.pop();
  return characters.length > 0 ? `${characters.join("")}..` : "";
}

const UNKNOWN: Glyph = GLYPHS.get("?") ?? { strokes: [], advance: SPACE_ADVANCE };

/** Accents are dropped; what the font lacks is shown as a question mark. */
function glyphsOf(text: string): Glyph[] {
  const plain = text.normalize("NFD").replace(/\p{Mn}/gu, "");
  return [...plain].map((character) => {
    if (/\s/.test(character)) return { strokes: [], advance: SPACE_ADVANCE };
    return GLYPHS.get(SAME[character] ?? character) ?? UNKNOWN;
  });
}

/** Unpack one entry. Digits keep the full width, so that columns of numbers line up; others take what they need. */
function glyph(entry: string): Glyph {
  const isOn = (row: number, column: number) =>
    row < ROWS &&
    column >= 0 &&
    column < COLUMNS &&
    (Number.parseInt(entry[1 + row] ?? "0", 32) >> (COLUMNS - 1 - column)) % 2 === 1;
  const points: [row: number, column: number][] = [];
  for (let row = 0; row < ROWS; row++) {
    for (let column = 0; column < COLUMNS; column++) if (isOn(row, column)) points.push([row, column]);
  }
  const columns = points.map(([, column]) => column);
  const isDigit = /\d/.test(entry[0] ?? "");
  const left = isDigit ? 0 : Math.min(...columns);
  const right = isDigit ? COLUMNS - 1 : Math.max(...columns);

  const strokes: Stroke[] = [];
  for (const [row, column] of points) {
    const x = column - left + 0.5;
    const y = row + 0.5;
    strokes.push([x, y, x, y]);
    if (isOn(row, column + 1)) strokes.push([x, y, x + 1, y]);
    if (isOn(row + 1, column)) strokes.push([x, y, x, y + 1]);
    // a diagonal only where no corner joins the two points already
    for (const side of [-1, 1]) {
      const isCorner = isOn(row, column + side) || isOn(row + 1, column);
      if (isOn(row + 1, column + side) && !isCorner) strokes.push([x, y, x + side, y + 1]);
    }
  }
  return { strokes, advance: right - left + 1 + GAP };
}
