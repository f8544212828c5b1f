import { createHash } from "node:crypto";
import { Html, html } from "./comparison-page/html.js";
import script from "./comparison-page/in-page.js?raw";
import { nameOf, numbers } from "./comparison-page/numbers.js";
import { recipes } from "./comparison-page/recipes.js";
import { style } from "./comparison-page/style.js";
import { viewer } from "./comparison-page/viewer.js";

export interface ComparisonPage {
  /** For example the raw file's name. */
  readonly title: string;
  readonly caution: string;
  /** File, SHA-256, version, matrix, noise method, region, edge and the like. */
  readonly facts: readonly (readonly [label: string, value: string])[];
  /** Name of the reference variant. */
  readonly reference: string;
  readonly columns: readonly {
    readonly id: string;
    readonly label: string;
    readonly unit: string;
    readonly describe: string;
  }[];
  readonly variants: readonly {
    /** For example "apodize.window=hann". */
    readonly name: string;
    /** By column id; theory and measurement are columns of their own. Null where there is nothing to say. */
    readonly values: Readonly<Record<string, number | null>>;
    /** YAML, to copy. */
    readonly recipe: string;
    /** PNG, one grey range for all. */
    readonly image: Uint8Array;
    /** PNG, signed colours, one scale for all; the reference has none. */
    readonly difference: Uint8Array | undefined;
  }[];
  /** The value shown in the darkest orange, minus this in the darkest blue, where the differences bear no scale. */
  readonly differenceLimit?: number;
  readonly greyRange: { readonly black: number; readonly white: number; readonly rule: string };
  /** Edge profiles, point spreads, noise. The SVG is put into the page as it is: without script, style or link. */
  readonly figures: readonly { readonly title: string; readonly svg: string; readonly describe: string }[];
}

/**
 * The comparison as one HTML document that needs nothing else: table, two variants under a divider, charts, recipes.
 * Everything is in the markup, so that it can be read without script; the script sorts, chooses, moves and copies.
 * The same data give the same bytes.
 * @throws RangeError where there is no variant, the reference is none of them, or an image is not a PNG
 */
export function comparisonPage(data: ComparisonPage): string {
  if (!data.variants.some((variant) => variant.name === data.reference)) {
    throw new RangeError(`the reference "${data.reference}" is none of the ${data.variants.length} variants`);
  }
  const policy = [
    "default-src 'none'",
    "img-src data:",
    `style-src '${contentHash(style)}'`,
    `script-src '${contentHash(script)}'`,
    "base-uri 'none'",
    "form-action 'none'",
  ].join("; ");
  return html`<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="${policy}">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="color-scheme" content="light dark">
<title>${data.title}</title>
<link rel="icon" href="data:,">
<style>${new Html(style)}</style>
</head>
<body>
<header>
<h1 class="name">${data.title}</h1>
<p class="caution" role="note">${data.caution}</p>
<p>Variants compared: ${data.variants.length}. Reference: ${nameOf(data.reference)}.</p>
<nav class="on-screen" aria-label="On this page"><ul>
<li><a href="#numbers">Numbers</a></li>
<li class="needs-script" hidden><a href="#pair">Two variants</a></li>
${data.figures.length > 0 ? html`<li><a href="#charts">Charts</a></li>` : undefined}
<li><a href="#recipes">Images and recipes</a></li>
<li><a href="#facts">Origin</a></li>
</ul></nav>
</header>
<main>
${numbers(data)}
${viewer(data)}
${charts(data)}
${recipes(data)}
<section id="facts">
<h2>Origin</h2>
<dl>
${data.facts.map(([label, value]) => html`<dt>${label}</dt><dd>${value}</dd>`)}
</dl>
</section>
</main>
<footer><p class="quiet">${data.caution}</p></footer>
<p class="heard" role="status" id="said"></p>
<script type="module">${new Html(script)}</script>
</body>
</html>
`.markup;
}

function charts({ figures }: ComparisonPage): Html | undefined {
  if (figures.length === 0) return undefined;
  return html`<section id="charts">
<h2>Charts</h2>
<div class="charts">
${figures.map(
  ({ title, svg, describe }) =>
    html`<figure><h3 class="heard">${title}</h3>${new Html(svg)}<figcaption>${describe}</figcaption></figure>`,
)}
</div>
</section>`;
}

/** What lets the browser run this text and no other. Source: W3C, Content Security Policy Level 3, section 2.3.1. */
function contentHash(text: string): string {
  return `sha256-${createHash("sha256").update(text).digest("base64")}`;
}
