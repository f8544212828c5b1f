import { PAGE_SCRIPT } from "./comparison-page-script.js";
import { PAGE_STYLE } from "./comparison-page-style.js";

/** A comparison as its page shows it. */
export interface ComparisonPage {
  readonly title: string;
  readonly caution: string;
  readonly facts: readonly (readonly [label: string, value: string])[];
  /** Name of the variant that others are measured against. */
  readonly reference: string;
  readonly columns: readonly {
    readonly id: string;
    readonly label: string;
    readonly unit: string;
    readonly describe: string;
  }[];
  readonly variants: readonly {
    readonly name: string;
    /** By column; null where there is none. */
    readonly values: Readonly<Record<string, number | null>>;
    /** To copy. */
    readonly recipe: string;
    /** PNG, all at one grey range. */
    readonly image: Uint8Array;
    /** PNG, signed, all in one scale of colours; the reference has none. */
    readonly difference: Uint8Array | undefined;
  }[];
  /** The value shown in the darkest orange; minus this in the darkest blue. */
  readonly differenceLimit: number;
  readonly greyRange: { readonly black: number; readonly white: number; readonly rule: string };
  readonly figures: readonly { readonly title: string; readonly svg: string; readonly describe: string }[];
}

/** One HTML page that needs nothing beside itself: no network, images inlined. The same data give the same bytes. */
export function comparisonPage(data: ComparisonPage): string {
  const { title, caution, facts, variants, figures, greyRange } = data;
  const other = variants.findIndex(({ name }) => name !== data.reference);
  const left = variants.findIndex(({ name }) => name === data.reference);
  const right = other < 0 ? left : other;
  return `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; img-src data:; style-src 'unsafe-inline'; script-src 'unsafe-inline'">
<title>${text(title)}</title>
<style>
${PAGE_STYLE}</style>
</head>
<body>
<header>
<h1>${text(title)}</h1>
<p class="caution">${text(caution)}</p>
</header>
<main>
<section aria-labelledby="figures-of">
<h2 id="figures-of">In figures</h2>
<p>Select a heading to sort by it. Reference: <strong>${text(data.reference)}</strong>.</p>
<div class="scroll" tabindex="0" role="region" aria-label="Table of measures">
${table(data)}
</div>
</section>
<section aria-labelledby="side">
<h2 id="side">Two under one divider</h2>
<div class="choose">
<label>Left <select id="left">${options(variants, left)}</select></label>
<label>Right <select id="right">${options(variants, right)}</select></label>
<label class="divider">Divider <input id="divider" type="range" min="0" max="100" step="1" value="50"></label>
<label><input id="sharp" type="checkbox" checked> single pixels</label>
</div>
<div id="stack" class="stack">
<figure><img id="under" alt="${attribute(variants[right]!.name)}" src="${png(variants[right]!.image)}" draggable="false"><figcaption id="under-name">${text(variants[right]!.name)}</figcaption></figure>
<figure class="over"><img id="over" alt="${attribute(variants[left]!.name)}" src="${png(variants[left]!.image)}" draggable="false"><figcaption id="over-name">${text(variants[left]!.name)}</figcaption></figure>
<div id="line" class="line" aria-hidden="true"></div>
</div>
<p class="small">All images: black ${number(greyRange.black)}, white ${number(greyRange.white)} (${text(greyRange.rule)}). Drag the line in the image, or use the arrow keys on the divider.</p>
</section>
<section aria-labelledby="differences">
<h2 id="differences">Differences from the reference</h2>
<p class="scale"><span>${number(-data.differenceLimit)}</span><span class="bar" role="img" aria-label="Colours from blue over white to orange"></span><span>+${number(data.differenceLimit)}</span></p>
<div class="grid">
${variants.map(({ name, difference }) => (difference ? `<figure><img alt="Difference of ${attribute(name)} from the reference" src="${png(difference)}"><figcaption>${text(name)}</figcaption></figure>` : "")).join("\n")}
</div>
</section>
<section aria-labelledby="curves">
<h2 id="curves">Curves</h2>
<div class="grid">
${figures.map(({ title: name, svg, describe }) => `<figure class="curve">${inlineSvg(svg)}<figcaption>${text(name)}: ${text(describe)}</figcaption></figure>`).join("\n")}
</div>
</section>
<section aria-labelledby="recipes">
<h2 id="recipes">Recipes</h2>
${variants.map(({ name, recipe }, i) => `<details><summary>${text(name)}</summary><pre id="recipe-${i}">${text(recipe)}</pre><button type="button" class="copy" data-from="recipe-${i}">Copy</button></details>`).join("\n")}
</section>
<section aria-labelledby="facts">
<h2 id="facts">What was compared</h2>
<dl>
${facts.map(([label, value]) => `<div><dt>${text(label)}</dt><dd>${text(value)}</dd></div>`).join("\n")}
</dl>
<h3>Columns</h3>
<dl>
${data.columns.map(({ label, unit, describe }) => `<div><dt>${text(heading(label, unit))}</dt><dd>${text(describe)}</dd></div>`).join("\n")}
</dl>
</section>
</main>
<p id="said" class="said" role="status" aria-live="polite"></p>
<script>
const images = ${json(variants.map(({ name, image }) => ({ name, image: png(image) })))};
${PAGE_SCRIPT}</script>
</body>
</html>
`;
}

function table({ columns, variants, reference }: ComparisonPage): string {
  const head = [{ label: "variant", unit: "", describe: "what the recipe has" }, ...columns].map(
    ({ label, unit, describe }, i) =>
      `<th scope="col"${i === 0 ? ` aria-sort="none"` : ` class="number" aria-sort="none"`}><button type="button" data-column="${i}" title="${attribute(describe)}">${text(heading(label, unit))}</button></th>`,
  );
  const rows = variants.map(
    ({ name, values }) =>
      `<tr${name === reference ? ` class="reference"` : ""}><th scope="row">${text(name)}</th>${columns
        .map(({ id }) => {
          const value = values[id] ?? null;
          return `<td class="number" data-value="${value ?? ""}">${value === null ? "–" : number(value)}</td>`;
        })
        .join("")}</tr>`,
  );
  return `<table id="measures"><thead><tr>${head.join("")}</tr></thead><tbody>\n${rows.join("\n")}\n</tbody></table>`;
}

function options(variants: ComparisonPage["variants"], chosen: number): string {
  return variants
    .map(({ name }, i) => `<option value="${i}"${i === chosen ? " selected" : ""}>${text(name)}</option>`)
    .join("");
}

function heading(label: string, unit: string): string {
  return unit ? `${label} (${unit})` : label;
}

/** Four digits. */
function number(value: number): string {
  return String(Number(value.toPrecision(4)));
}

function png(bytes: Uint8Array): string {
  return `data:image/png;base64,${Buffer.from(bytes).toString("base64")}`;
}

/** The drawing as wide as there is room, whatever its size on paper. */
function inlineSvg(svg: string): string {
  return svg.replace(/<svg ([^>]*?)width="[^"]*" height="[^"]*"/, "<svg $1");
}

function text(value: string): string {
  return value.replaceAll("&", "&amp;").replaceAll("<", "&lt;").replaceAll(">", "&gt;");
}

function attribute(value: string): string {
  return text(value).replaceAll('"', "&quot;").replaceAll("'", "&#39;");
}

/** JSON that cannot end the script that it stands in. */
function json(value: unknown): string {
  return JSON.stringify(value)
    .replaceAll("<", "\\u003c")
    .replaceAll("\u2028", "\\u2028")
    .replaceAll("\u2029", "\\u2029");
}
