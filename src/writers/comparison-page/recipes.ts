import type { ComparisonPage } from "../comparison-page.js";
import { Html, html } from "./html.js";
import { nameOf, REFERENCE } from "./numbers.js";

const PNG_SIGNATURE = "89504e470d0a1a0a";

/** Every variant: its image, its difference from the reference, and the recipe that makes it. */
export function recipes({ variants, reference }: ComparisonPage): Html {
  return html`<section id="recipes">
<h2>Images and recipes</h2>
<div class="variants">
${variants.map(
  (
    { name, recipe, image, difference },
    v,
  ) => html`<article class="variant" id="variant-${v}" data-name="${name}">
<h3>${nameOf(name)}${name === reference ? REFERENCE : undefined}</h3>
<figure>${picture(image, `Image of ${name}`, "image")}</figure>
<figure>${
    difference === undefined
      ? html`<figcaption>No difference: every other image is held against this one.</figcaption>`
      : html`${picture(difference, `${name} minus ${reference}`, "difference")}<figcaption>minus ${nameOf(reference)}</figcaption>`
  }</figure>
<div class="recipe">
<button type="button" class="copy on-screen needs-script" aria-label="Copy the recipe of ${name}" hidden>Copy the recipe</button>
<span role="status" class="copied on-screen"></span>
<details><summary class="on-screen">Recipe</summary><pre tabindex="0" aria-label="Recipe of ${name}"><code>${recipe}</code></pre></details>
</div>
</article>`,
)}
</div>
</section>`;
}

function picture(png: Uint8Array, alt: string, className: string): Html {
  const bytes = Buffer.from(png.buffer, png.byteOffset, png.byteLength);
  if (bytes.subarray(0, 8).toString("hex") !== PNG_SIGNATURE || bytes.length < 24) {
    throw new RangeError(`${alt} is not a PNG`);
  }
  // The header chunk comes first: length, "IHDR", width, height (W3C, Portable Network Graphics Specification, 11.2.2).
  const [width, height] = [bytes.readUInt32BE(16), bytes.readUInt32BE(20)];
  const source = new Html(`data:image/png;base64,${bytes.toString("base64")}`); // has nothing to escape
  return html`<img class="${className}" alt="${alt}" width="${width}" height="${height}" src="${source}">`;
}
