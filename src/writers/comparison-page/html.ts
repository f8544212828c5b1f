/** Markup, as against text that is still to be escaped. */
export class Html {
  constructor(readonly markup: string) {}
}

export type Content = Html | string | number | undefined | readonly Content[];

/** Markup from a template: texts put into it are escaped, markup is not, lists are joined, undefined is nothing. */
export function html(template: TemplateStringsArray, ...contents: readonly Content[]): Html {
  return new Html(
    template.reduce((markup, piece, i) => markup + markupOf(contents[i - 1]) + piece), // contents[i - 1] precedes piece i
  );
}

function markupOf(content: Content): string {
  if (content === undefined) return "";
  if (content instanceof Html) return content.markup;
  if (typeof content === "string" || typeof content === "number") return escapeHtml(String(content));
  return content.map(markupOf).join("");
}

/** Text for an element or a quoted attribute; characters that HTML does not allow are left out. */
function escapeHtml(text: string): string {
  return (
    text
      // biome-ignore lint/suspicious/noControlCharactersInRegex: these are what HTML does not allow
      .replace(/[\u0000-\u0008\u000b\u000c\u000e-\u001f\u007f]/g, "")
      .replaceAll("&", "&amp;")
      .replaceAll("<", "&lt;")
      .replaceAll(">", "&gt;")
      .replaceAll('"', "&quot;")
      .replaceAll("'", "&#39;")
      .replaceAll("\r", "&#13;") // a bare one would be read as a line feed, and a recipe must come out as it went in
  );
}
