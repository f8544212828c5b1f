/** Where an item stands: its line from 0, and its left end. */
export interface FlowPlace {
  readonly line: number;
  readonly left: number;
}

/** Set items of these widths side by side, and begin a new line where the next would pass `available`. */
export function flow(widths: readonly number[], gap: number, available: number): FlowPlace[] {
  let line = 0;
  let left = 0;
  return widths.map((width) => {
    if (left > 0 && left + width > available) {
      line += 1;
      left = 0;
    }
    const place = { line, left };
    left += width + gap;
    return place;
  });
}
