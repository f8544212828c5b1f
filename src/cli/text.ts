/** Break a line at spaces so that it fits a terminal of `width` columns; further lines start with `indent`. */
export function wrap(text: string, width: number, indent: string): string {
  const lines: string[] = [];
  const words = text.trimStart().split(" ");
  let line = text.slice(0, text.length - text.trimStart().length) + words.shift();
  for (const word of words) {
    const next = `${line} ${word}`;
    if (visibleLength(next) > width) {
      lines.push(line);
      line = indent + word;
    } else line = next;
  }
  return [...lines, line].join("\n");
}

/** `1 line`, `2 lines`. */
export function counted(count: number, noun: string, plural = `${noun}s`): string {
  return `${count} ${count === 1 ? noun : plural}`;
}

/** `a`, `a and b`, `a, b and c`. */
export function listed(words: readonly string[]): string {
  return [words.slice(0, -1).join(", "), words.at(-1)].filter(Boolean).join(" and ");
}

function visibleLength(text: string): number {
  // biome-ignore lint/suspicious/noControlCharactersInRegex: escape sequences are what is left out
  return text.replace(/\u001b\[\d+m/g, "").length;
}
