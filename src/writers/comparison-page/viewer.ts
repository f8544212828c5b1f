import { divergingColour } from "../colour-map.js";
import type { ComparisonPage } from "../comparison-page.js";
import { shortNumber } from "../number-text.js";
import { type Html, html } from "./html.js";
import { withUnit } from "./numbers.js";

/** Two variants at one place under a divider. Empty and hidden in the markup: the script fills and shows it. */
export function viewer(data: ComparisonPage): Html {
  const { black, white, rule } = data.greyRange;
  const first = Math.max(
    0,
    data.variants.findIndex(({ name }) => name === data.reference),
  );
  const second = data.variants.findIndex((_, v) => v !== first);
  return html`<section id="pair" class="needs-script" hidden>
<h2>Two variants</h2>
<div class="choices on-screen">
${chooser(data, "a", "left", first)}
${chooser(data, "b", "right", second < 0 ? first : second)}
<label>Size<br><select id="size">
<option value="fit">as the window allows</option>
<option value="1">100 %</option>
<option value="2">200 %</option>
<option value="3">300 %</option>
<option value="4">400 %</option>
</select></label>
<label class="pixels"><input type="checkbox" id="pixelated" checked> Pixels as squares</label>
</div>
<div class="viewer">
<div>
<div class="window pixelated" id="window" role="region" aria-label="The two images" tabindex="0">
<div class="stage" id="stage">
<div class="pair" id="images">
<figure class="left"><img alt=""><figcaption></figcaption></figure>
<figure class="right"><img alt=""><figcaption></figcaption></figure>
</div>
<div class="divider on-screen"></div>
<div class="knob on-screen" id="knob" role="slider" tabindex="0" aria-label="Divider: A left of it, B right of it" aria-orientation="horizontal" aria-valuemin="0" aria-valuemax="100" aria-valuenow="50">A ↔ B</div>
</div>
</div>
<div class="quick on-screen">
<button type="button" data-divider="100">Only A</button>
<button type="button" data-divider="50">Half and half</button>
<button type="button" data-divider="0">Only B</button>
<button type="button" id="swap">Swap A and B</button>
</div>
<p class="quiet">Both images have one grey range: black ${shortNumber(black, 4)}, white ${shortNumber(white, 4)} (${rule}).
<span class="on-screen">Arrow keys move the divider by 1 %, with Shift or Page keys by 10 %; End shows only A, Home only B.</span></p>
<p id="shapes" hidden>A and B differ in shape: what lies at the same place in the two images is not the same place in the object.</p>
</div>
<table class="against on-screen" id="against">
<caption>A against B</caption>
<thead><tr><th scope="col">Number</th><th scope="col" class="side-a">A</th><th scope="col" class="side-b">B</th></tr></thead>
<tbody>
${data.columns.map(({ label, unit }) => html`<tr><th scope="row">${withUnit(label, unit)}</th><td></td><td></td></tr>`)}
</tbody>
</table>
</div>
${data.differenceLimit === undefined ? undefined : differenceScale(data.differenceLimit)}
<div class="differences${data.differenceLimit === undefined ? "" : " bare"}">
<figure id="difference-a"><img alt=""><figcaption></figcaption></figure>
<figure id="difference-b"><img alt=""><figcaption></figcaption></figure>
</div>
</section>`;
}

function chooser({ variants }: ComparisonPage, side: "a" | "b", where: string, chosen: number): Html {
  const options = variants.map(({ name }, v) =>
    v === chosen
      ? html`<option value="${v}" selected>${name}</option>`
      : html`<option value="${v}">${name}</option>`,
  );
  return html`<label><span class="side-${side}">${side.toUpperCase()}</span>, ${where}<br><select id="choose-${side}" autocomplete="off">
${options}
</select></label>`;
}

const SCALE_STEPS = 64;

/** The colours of the differences with their values; drawn, as paper leaves backgrounds out. */
function differenceScale(limit: number): Html {
  const steps = Array.from({ length: SCALE_STEPS + 1 }, (_, i) => {
    const colour = divergingColour((2 * i) / SCALE_STEPS - 1).join(" ");
    return html`<rect x="${i}" width="${SCALE_STEPS + 1 - i}" height="4" fill="rgb(${colour})"/>`; // each to the end: no seams
  });
  const text = shortNumber(limit, 4);
  return html`<p class="scale">Differences: <span>−${text}</span>
<svg viewBox="0 0 ${SCALE_STEPS + 1} 4" preserveAspectRatio="none" role="img" aria-label="from blue over white, which is 0, to orange">${steps}</svg>
<span>+${text}</span></p>`;
}
