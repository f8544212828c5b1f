/** How the comparison's page looks: on a screen, light or dark, wide or narrow, and on paper. */
export const PAGE_STYLE = `:root { color-scheme: light dark; --ink: #1d1f21; --paper: #fcfcfa; --faint: #5c6166; --rule: #cfd2d4; --mark: #0b5a99; --ground: #2c2c2c; --warn: #fff3d6; --warn-ink: #5a3d00; }
@media (prefers-color-scheme: dark) { :root { --ink: #e8e8e6; --paper: #17191b; --faint: #a9afb4; --rule: #3b4045; --mark: #7dbcf0; --warn: #3d3215; --warn-ink: #ffe3a3; } }
* { box-sizing: border-box; }
body { margin: 0 auto; padding: 1rem clamp(0.75rem, 3vw, 2.5rem) 3rem; max-width: 78rem; color: var(--ink); background: var(--paper); font: 1rem/1.5 system-ui, "Liberation Sans", Arial, sans-serif; }
h1 { font-size: 1.5rem; margin: 0.5rem 0; overflow-wrap: anywhere; }
h2 { font-size: 1.15rem; margin: 2rem 0 0.5rem; }
h3 { font-size: 1rem; }
.caution { background: var(--warn); color: var(--warn-ink); padding: 0.6rem 0.9rem; border-radius: 4px; margin: 0.5rem 0; }
.small { color: var(--faint); font-size: 0.875rem; }
.scroll { overflow-x: auto; }
table { border-collapse: collapse; font-size: 0.9rem; font-variant-numeric: tabular-nums; }
th, td { padding: 0.35rem 0.6rem; border-bottom: 1px solid var(--rule); text-align: left; vertical-align: bottom; }
tbody th { font-weight: 600; white-space: nowrap; position: sticky; left: 0; background: var(--paper); }
.number { text-align: right; }
tr.reference > * { border-bottom-color: var(--mark); border-bottom-width: 2px; }
thead button { all: unset; cursor: pointer; font-weight: 600; padding: 0.15rem 0; max-width: 8.5rem; }
thead button::after { content: " \\2195"; color: var(--faint); }
[aria-sort="ascending"] button::after { content: " \\2191"; color: var(--mark); }
[aria-sort="descending"] button::after { content: " \\2193"; color: var(--mark); }
:focus-visible, thead button:focus-visible { outline: 3px solid var(--mark); outline-offset: 2px; }
.choose { display: flex; flex-wrap: wrap; gap: 0.75rem 1.5rem; align-items: center; margin-bottom: 0.75rem; }
.choose select, .choose input { font: inherit; max-width: 100%; }
.divider { display: flex; gap: 0.5rem; align-items: center; flex: 1 1 16rem; }
.divider input { flex: 1; }
.stack { --split: 50%; position: relative; width: min(100%, 34rem); background: var(--ground); touch-action: pan-y; cursor: ew-resize; user-select: none; }
.stack figure { margin: 0; }
.stack img { display: block; width: 100%; image-rendering: pixelated; }
.stack.smooth img { image-rendering: auto; }
.stack .over { position: absolute; inset: 0; clip-path: inset(0 calc(100% - var(--split)) 0 0); }
.stack figcaption { position: absolute; bottom: 0; right: 0; padding: 0.1rem 0.5rem; background: rgb(20 20 20 / 0.75); color: #fff; font-size: 0.85rem; }
.stack .over figcaption { right: auto; left: 0; }
.line { position: absolute; top: 0; bottom: 0; left: var(--split); width: 2px; margin-left: -1px; background: #fff; box-shadow: 0 0 0 1px #000; }
.grid { display: grid; grid-template-columns: repeat(auto-fill, minmax(min(100%, 20rem), 1fr)); gap: 1rem; }
.scale { display: flex; gap: 0.5rem; align-items: center; }
.bar { width: 14rem; height: 0.9rem; border: 1px solid var(--faint); background: linear-gradient(to right, rgb(19 88 139), rgb(17 129 203), rgb(89 171 248), rgb(184 212 250), #fff, rgb(243 201 174), rgb(224 148 95), rgb(188 101 30), rgb(133 67 8)); print-color-adjust: exact; }
.grid figure { margin: 0; }
.grid img { image-rendering: pixelated; }
.grid img, .grid svg { width: 100%; height: auto; display: block; background: #fff; }
figcaption { font-size: 0.9rem; color: var(--faint); }
pre { overflow-x: auto; padding: 0.75rem; border: 1px solid var(--rule); border-radius: 4px; font-size: 0.85rem; }
summary { cursor: pointer; padding: 0.25rem 0; }
button.copy { font: inherit; padding: 0.25rem 0.9rem; }
dl div { display: grid; grid-template-columns: minmax(9rem, 16rem) 1fr; gap: 0.25rem 1rem; border-bottom: 1px solid var(--rule); padding: 0.25rem 0; }
dt { font-weight: 600; }
dd { margin: 0; overflow-wrap: anywhere; }
.said { position: fixed; bottom: 0; left: 0; margin: 0; padding: 0.25rem 0.75rem; background: var(--ink); color: var(--paper); font-size: 0.875rem; }
.said:empty { display: none; }
@media (max-width: 36rem) { dl div { grid-template-columns: 1fr; } }
@media (prefers-reduced-motion: no-preference) { .said { transition: opacity 0.2s; } }
@media print {
  :root { color-scheme: light; --ink: #000; --paper: #fff; --faint: #333; --rule: #999; --warn: #fff; --warn-ink: #000; }
  body { max-width: none; padding: 0; font-size: 9pt; }
  .caution { border: 1px solid #000; }
  .scroll { overflow: visible; }
  table { font-size: 6.5pt; }
  th, td { padding: 1pt 2pt; }
  tbody th { position: static; white-space: normal; }
  thead button::after { content: ""; }
  .choose, .line, button.copy, .said { display: none; }
  .stack { display: grid; grid-template-columns: 1fr 1fr; gap: 6pt; width: 100%; background: none; }
  .stack .over { position: relative; clip-path: none; order: -1; }
  .stack figcaption, .stack .over figcaption { position: static; background: none; color: #000; }
  figure, details, tr { break-inside: avoid; }
  .grid { grid-template-columns: 1fr 1fr; }
}
`;
