import { line } from "d3-shape";
import { type Drawing, type Mark, MM_PER_POINT, type Point } from "./drawing.js";
import { CAUTION } from "./png.js";

/** The drawing as an SVG document of its true size, with real text; coordinates are points, to a hundredth. */
export function drawingSvg(drawing: Drawing): string {
  const { widthPt, heightPt, title, marks } = drawing;
  const size = `width="${round(widthPt * MM_PER_POINT)}mm" height="${round(heightPt * MM_PER_POINT)}mm"`;
  return `${[
    `<svg xmlns="http://www.w3.org/2000/svg" ${size} viewBox="0 0 ${round(widthPt)} ${round(heightPt)}" role="img">`,
    `<title>${escapeXml(title)}</title>`,
    `<desc>${escapeXml(CAUTION)}</desc>`,
    `<rect width="100%" height="100%" fill="#ffffff"/>`,
    `<g font-family="Helvetica, Arial, 'Liberation Sans', sans-serif" stroke-linejoin="round" stroke-linecap="butt">`,
    ...marks.map(element),
    "</g>",
    "</svg>",
  ].join("\n")}\n`;
}

function element(mark: Mark): string {
  switch (mark.kind) {
    case "lines": {
      const path = line<Point>().digits(2);
      const d = mark.pieces.map((piece) => path(piece)).join("");
      const dash = mark.dashPt ? ` stroke-dasharray="${mark.dashPt.map(round).join(" ")}"` : "";
      return `<path d="${d}" fill="none" stroke="${mark.colour}" stroke-width="${round(mark.widthPt)}"${dash}/>`;
    }
    case "dots": {
      const circles = mark.centres.map(
        ([x, y]) => `<circle cx="${round(x)}" cy="${round(y)}" r="${round(mark.radiusPt)}"/>`,
      );
      return `<g fill="${mark.colour}">${circles.join("")}</g>`;
    }
    case "text": {
      const [x, y] = mark.at.map(round) as [number, number]; // a point has two numbers, and so has its image
      const turn = mark.isVertical ? ` transform="rotate(-90 ${x} ${y})"` : "";
      const weight = mark.isBold ? ` font-weight="bold"` : "";
      const style = `text-anchor="${mark.anchor}" font-size="${round(mark.sizePt)}" fill="${mark.colour}"`;
      return `<text x="${x}" y="${y}" ${style}${weight}${turn}>${escapeXml(mark.text)}</text>`;
    }
  }
}

function round(value: number): number {
  return Math.round(value * 100) / 100;
}

/** Text for an XML document; characters that XML forbids are left out. */
function escapeXml(text: string): string {
  return (
    text
      // biome-ignore lint/suspicious/noControlCharactersInRegex: these are what XML 1.0 forbids
      .replace(/[\u0000-\u0008\u000b\u000c\u000e-\u001f]/g, "")
      .replaceAll("&", "&amp;")
      .replaceAll("<", "&lt;")
      .replaceAll(">", "&gt;")
      .replaceAll('"', "&quot;")
  );
}
