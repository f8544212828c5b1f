/**
 * Comma-separated values (RFC 4180) with a head line; numbers with all their digits, nothing for what is missing.
 * @param rows one object a line, the keys of the first are the columns
 */
export function csvText(
  rows: readonly Readonly<Record<string, string | number | boolean | null | undefined>>[],
): string {
  const columns = Object.keys(rows[0] ?? {});
  const lines = rows.map((row) => columns.map((column) => cell(row[column])).join(","));
  return `${[columns.map(cell).join(","), ...lines].join("\r\n")}\r\n`;
}

function cell(value: string | number | boolean | null | undefined): string {
  if (value === null || value === undefined || (typeof value === "number" && !Number.isFinite(value)))
    return "";
  const text = String(value);
  return /[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text;
}
