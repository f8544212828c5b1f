/** What the comparison's page does in the browser; `images` stands before it. */
export const PAGE_SCRIPT = `const byId = (id) => document.getElementById(id);
const say = (words) => { byId("said").textContent = words; };

// The table: a heading sorts by its column, a second time the other way; missing values stay last.
const body = byId("measures").tBodies[0];
for (const button of document.querySelectorAll("#measures thead button")) {
  button.addEventListener("click", () => {
    const column = Number(button.dataset.column);
    const head = button.parentElement;
    const rising = head.getAttribute("aria-sort") !== "ascending";
    for (const each of head.parentElement.cells) each.setAttribute("aria-sort", "none");
    head.setAttribute("aria-sort", rising ? "ascending" : "descending");
    const keyOf = (row) => {
      const cell = row.cells[column];
      if (column === 0) return cell.textContent;
      return cell.dataset.value === "" ? null : Number(cell.dataset.value);
    };
    const rows = [...body.rows].map((row, place) => ({ row, place, key: keyOf(row) }));
    rows.sort((a, b) => {
      if (a.key === null || b.key === null) return (a.key === null) - (b.key === null) || a.place - b.place;
      const order = column === 0 ? a.key.localeCompare(b.key, "en") : a.key - b.key;
      return (rising ? order : -order) || a.place - b.place;
    });
    for (const { row } of rows) body.append(row);
    say("Sorted by " + button.textContent + (rising ? ", rising" : ", falling"));
  });
}

// Two variants under the divider: the left one lies above, cut off at the line.
const show = (select, image, caption) => {
  const { name, image: source } = images[Number(select.value)];
  byId(image).src = source;
  byId(image).alt = name;
  byId(caption).textContent = name;
};
byId("left").addEventListener("change", () => show(byId("left"), "over", "over-name"));
byId("right").addEventListener("change", () => show(byId("right"), "under", "under-name"));
const stack = byId("stack");
const place = () => stack.style.setProperty("--split", byId("divider").value + "%");
byId("divider").addEventListener("input", place);
const follow = (event) => {
  const box = byId("under").getBoundingClientRect();
  const share = (100 * (event.clientX - box.left)) / box.width;
  byId("divider").value = String(Math.max(0, Math.min(100, share)));
  place();
};
stack.addEventListener("pointerdown", (event) => {
  stack.setPointerCapture(event.pointerId);
  stack.dataset.held = "yes";
  follow(event);
});
stack.addEventListener("pointermove", (event) => { if (stack.dataset.held) follow(event); });
for (const end of ["pointerup", "pointercancel"]) stack.addEventListener(end, () => { delete stack.dataset.held; });
byId("sharp").addEventListener("change", () => stack.classList.toggle("smooth", !byId("sharp").checked));
place();

// Recipes: the clipboard, or the text selected where a page opened from disk may not use it.
for (const button of document.querySelectorAll("button.copy")) {
  button.addEventListener("click", async () => {
    const source = byId(button.dataset.from);
    try {
      await navigator.clipboard.writeText(source.textContent);
      say("Recipe copied");
      button.textContent = "Copied";
    } catch {
      getSelection().selectAllChildren(source);
      say("Recipe selected: copy it with the keyboard");
      button.textContent = "Selected";
    }
  });
}
for (const event of ["beforeprint", "afterprint"])
  addEventListener(event, () => {
    for (const each of document.querySelectorAll("details")) each.open = event === "beforeprint";
  });
`;
