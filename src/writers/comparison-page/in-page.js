// Runs inside the comparison page. All it needs is in the markup; it holds no data of its own.

/**
 * @template {Element} T
 * @param {string} selector
 * @param {new () => T} type
 * @param {ParentNode} within
 */
function one(selector, type, within = document) {
  const found = within.querySelector(selector);
  if (!(found instanceof type)) throw new Error(`the page has no ${selector}`);
  return found;
}

/**
 * @template {Element} T
 * @param {string} selector
 * @param {new () => T} type
 */
function every(selector, type) {
  return /** @type {T[]} */ (
    [...document.querySelectorAll(selector)].filter((found) => found instanceof type)
  );
}

const said = one("#said", HTMLElement);

for (const part of every(".needs-script", HTMLElement)) part.hidden = false;

// Sort: upward, downward, as it was. What is missing comes last either way.

const NEXT_ORDER = new Map([
  ["none", "ascending"],
  ["ascending", "descending"],
  ["descending", "none"],
]);
const collator = new Intl.Collator("en", { numeric: true });
const table = one("#numbers table", HTMLTableElement);
const rowsAsGiven = [...table.tBodies[0].rows];

/** @param {HTMLTableCellElement} heading */
function sortBy(heading) {
  const order = NEXT_ORDER.get(heading.getAttribute("aria-sort") ?? "none") ?? "none";
  for (const other of every("#numbers thead [aria-sort]", HTMLElement)) other.removeAttribute("aria-sort");
  if (order !== "none") heading.setAttribute("aria-sort", order);
  const sign = order === "descending" ? -1 : 1;
  /** @param {HTMLTableRowElement} row */
  const cellValue = (row) => row.cells[heading.cellIndex].dataset.value;
  const rows = [...rowsAsGiven];
  if (order !== "none") {
    rows.sort((one, other) => {
      const [left, right] = [cellValue(one), cellValue(other)];
      if (left === undefined || right === undefined)
        return Number(left === undefined) - Number(right === undefined);
      return sign * (heading.dataset.kind === "text" ? collator.compare(left, right) : compare(left, right));
    });
  }
  table.tBodies[0].append(...rows);
  const label = heading.querySelector("button")?.firstChild?.textContent;
  said.textContent = order === "none" ? "Rows as they were." : `Sorted by ${label}, ${order}.`;
}

/** Not a subtraction: two infinite values are equal. @param {string} left @param {string} right */
function compare(left, right) {
  return Number(Number(left) > Number(right)) - Number(Number(left) < Number(right));
}

for (const button of every("button.sort", HTMLButtonElement)) {
  button.addEventListener("click", () => sortBy(/** @type {HTMLTableCellElement} */ (button.parentElement)));
}

// Choose two variants, from the lists or from the rows of the table.

const choosers = { a: one("#choose-a", HTMLSelectElement), b: one("#choose-b", HTMLSelectElement) };
const shown = { a: choosers.a.value, b: choosers.b.value };
const stage = one("#stage", HTMLElement);
const size = one("#size", HTMLSelectElement);

/** A variant that the other side shows changes places with it. @param {"a" | "b"} side @param {string} variant */
function choose(side, variant) {
  const other = side === "a" ? "b" : "a";
  if (shown[other] === variant) shown[other] = shown[side];
  shown[side] = variant;
  showPair();
}

function showPair() {
  const left = showSide("a", one(".left", HTMLElement), 1);
  const right = showSide("b", one(".right", HTMLElement), 2);
  const aspect = left.width / left.height;
  stage.style.setProperty("--aspect", String(aspect));
  stage.dataset.size = size.value === "fit" ? "fit" : "whole";
  stage.style.setProperty("--width", `${left.width * Number(size.value)}px`);
  // Images of one field on two matrices differ in shape by the rounding of a pixel at most.
  one("#shapes", HTMLElement).hidden = Math.abs(right.width / right.height / aspect - 1) < 0.02;
  for (const button of every("button[data-side]", HTMLButtonElement)) {
    const side = button.dataset.side === "a" ? "a" : "b";
    button.setAttribute("aria-pressed", String(button.dataset.variant === shown[side]));
  }
}

/** @param {"a" | "b"} side @param {HTMLElement} figure @param {number} column of the table of the pair */
function showSide(side, figure, column) {
  choosers[side].value = shown[side];
  const variant = one(`#variant-${shown[side]}`, HTMLElement);
  const letter = side.toUpperCase();
  const name = variant.dataset.name ?? "";
  const source = one(".image", HTMLImageElement, variant);
  const picture = one("img", HTMLImageElement, figure);
  picture.src = source.src;
  picture.alt = `${letter}: ${name}`;
  one("figcaption", HTMLElement, figure).textContent = `${letter}: ${name}`;

  const difference = variant.querySelector("img.difference");
  const differenceFigure = one(`#difference-${side}`, HTMLElement);
  const differencePicture = one("img", HTMLImageElement, differenceFigure);
  differencePicture.hidden = !(difference instanceof HTMLImageElement);
  if (difference instanceof HTMLImageElement) {
    differencePicture.src = difference.src;
    differencePicture.alt = difference.alt;
  }
  one("figcaption", HTMLElement, differenceFigure).textContent =
    difference instanceof HTMLImageElement
      ? `${letter}: ${difference.alt}`
      : `${letter}: ${name} is the reference, from which nothing is subtracted.`;

  const cells = [...(rowsAsGiven[Number(shown[side])]?.cells ?? [])].slice(2); // after the name and the buttons
  const rows = one("#against", HTMLTableElement).tBodies[0].rows;
  cells.forEach((cell, i) => {
    rows[i].cells[column].replaceChildren(...cell.cloneNode(true).childNodes);
  });
  // Of the image itself: its properties tell the size on the screen.
  return { width: Number(source.getAttribute("width")), height: Number(source.getAttribute("height")) };
}

for (const side of /** @type {const} */ (["a", "b"])) {
  choosers[side].addEventListener("change", () => choose(side, choosers[side].value));
}
for (const button of every("button[data-side]", HTMLButtonElement)) {
  button.addEventListener("click", () => {
    const { side, variant = "0" } = button.dataset;
    choose(side === "a" ? "a" : "b", variant);
    said.textContent = `A shows ${nameShown("a")}, B shows ${nameShown("b")}.`;
  });
}

/** @param {"a" | "b"} side */
function nameShown(side) {
  return choosers[side].selectedOptions[0].text;
}

one("#swap", HTMLButtonElement).addEventListener("click", () => choose("a", shown.b));
size.addEventListener("change", showPair);
const pixelated = one("#pixelated", HTMLInputElement);
const showPixels = () => one("#window", HTMLElement).classList.toggle("pixelated", pixelated.checked);
pixelated.addEventListener("change", showPixels);

// The divider: its place in percent of the width, A left of it.

const images = one("#images", HTMLElement);
const knob = one("#knob", HTMLElement);
let dividerPercent = 50;

/** @param {number} percent */
function moveDivider(percent) {
  dividerPercent = Math.min(100, Math.max(0, Math.round(percent * 10) / 10));
  stage.style.setProperty("--divider", `${dividerPercent}%`);
  knob.setAttribute("aria-valuenow", String(dividerPercent));
  knob.setAttribute(
    "aria-valuetext",
    `${dividerPercent} % A, ${Math.round(1000 - dividerPercent * 10) / 10} % B`,
  );
}

knob.addEventListener("keydown", (event) => {
  const step = event.shiftKey ? 10 : 1;
  const places = new Map([
    ["ArrowLeft", dividerPercent - step],
    ["ArrowDown", dividerPercent - step],
    ["ArrowRight", dividerPercent + step],
    ["ArrowUp", dividerPercent + step],
    ["PageDown", dividerPercent - 10],
    ["PageUp", dividerPercent + 10],
    ["Home", 0],
    ["End", 100],
  ]);
  const place = places.get(event.key);
  if (place === undefined || event.altKey || event.ctrlKey || event.metaKey) return;
  event.preventDefault();
  moveDivider(place);
});

/** @param {MouseEvent} event */
function moveToPointer(event) {
  const { left, width } = images.getBoundingClientRect();
  moveDivider((100 * (event.clientX - left)) / width);
}

for (const part of [images, knob]) {
  part.addEventListener("pointerdown", (event) => {
    // A finger on the images scrolls; it moves the divider on the knob, or by a tap.
    if (event.button !== 0 || (event.pointerType === "touch" && part !== knob)) return;
    event.preventDefault();
    knob.focus({ preventScroll: true });
    part.setPointerCapture(event.pointerId);
    if (part === images) moveToPointer(event);
  });
  part.addEventListener("pointermove", (event) => {
    if (part.hasPointerCapture(event.pointerId)) moveToPointer(event);
  });
}
images.addEventListener("click", moveToPointer);
for (const button of every("button[data-divider]", HTMLButtonElement)) {
  button.addEventListener("click", () => moveDivider(Number(button.dataset.divider)));
}

// Copy a recipe; where the browser refuses, select it for the reader to copy.

for (const button of every("button.copy", HTMLButtonElement)) {
  button.addEventListener("click", async () => {
    const recipe = /** @type {HTMLElement} */ (button.parentElement);
    const text = one("code", HTMLElement, recipe);
    const outcome = one(".copied", HTMLElement, recipe);
    try {
      await navigator.clipboard.writeText(text.textContent ?? "");
      outcome.textContent = "Copied.";
    } catch {
      one("details", HTMLDetailsElement, recipe).open = true;
      getSelection()?.selectAllChildren(text);
      outcome.textContent = "Selected: copy it with Ctrl+C or ⌘C.";
    }
  });
}

// Folded parts are printed too, then folded again.

/** @type {HTMLDetailsElement[]} */
let unfolded = [];
addEventListener("beforeprint", () => {
  unfolded = every("details:not([open])", HTMLDetailsElement);
  for (const part of unfolded) part.open = true;
});
addEventListener("afterprint", () => {
  for (const part of unfolded) part.open = false;
});

showPixels();
showPair();
moveDivider(50);
