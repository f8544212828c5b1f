import type { ComparisonPage } from "../comparison-page.js";
import { columnTexts, isValue } from "./column-texts.js";
import { type Content, type Html, html } from "./html.js";

/** The table of figures, one row a variant, with buttons that sort and that choose the pair. */
export function numbers({ columns, variants, reference }: ComparisonPage): Html {
  const texts = columns.map(({ id }) => columnTexts(variants.map(({ values }) => values[id])));
  const rows = variants.map(({ name, values }, v) => {
    const cells = columns.map(({ id }, c) => {
      const value = values[id];
      const text = texts[c]?.[v];
      return isValue(value)
        ? html`<td data-value="${value}">${text}</td>`
        : html`<td><span aria-hidden="true">${text}</span><span class="heard">none</span></td>`;
    });
    return html`<tr data-variant="${v}">
<th scope="row" data-value="${name}">${nameOf(name)}${name === reference ? REFERENCE : undefined}</th>
<td class="show-as on-screen needs-script" hidden>${chooseButton("a", v, name)}${chooseButton("b", v, name)}</td>
${cells}
</tr>`;
  });
  return html`<section id="numbers">
<h2>Numbers</h2>
<p class="quiet on-screen needs-script" hidden>A heading sorts by its column: once upward, twice downward, three times as it was.</p>
<div class="scroll" role="region" aria-label="Table of numbers" tabindex="0">
<table aria-label="Numbers of every variant">
<thead><tr>
${heading("Variant", "", "text")}
<th scope="col" class="show-as on-screen needs-script" hidden>Show as</th>
${columns.map(({ label, unit }) => heading(label, unit, "number"))}
</tr></thead>
<tbody>
${rows}
</tbody>
</table>
</div>
<details>
<summary class="on-screen">What the columns say</summary>
<dl>
${columns.map(({ label, unit, describe }) => html`<dt>${withUnit(label, unit)}</dt><dd>${describe}</dd>`)}
</dl>
</details>
</section>`;
}

/** A variant's name, which may go on in the next line after each of its parts. */
export function nameOf(name: string): Html {
  const parts = name.split(/(?<=[=,;/])|(?<=\.)(?=[a-z])/);
  return html`<span class="name">${parts.map((part, i) => (i === 0 ? part : html`<wbr>${part}`))}</span>`;
}

export const REFERENCE = html` <span class="badge">(reference)</span>`;

export function withUnit(label: string, unit: string): Content {
  return unit === "" ? label : `${label} (${unit})`;
}

function heading(label: string, unit: string, kind: "text" | "number"): Html {
  return html`<th scope="col" data-kind="${kind}"><button type="button" class="sort">${label}<span class="unit">${unit}</span></button></th>`;
}

function chooseButton(side: "a" | "b", variant: number, name: string): Html {
  const letter = side.toUpperCase();
  return html`<button type="button" data-side="${side}" data-variant="${variant}" aria-pressed="false" aria-label="Show ${name} as ${letter}">${letter}</button>`;
}
