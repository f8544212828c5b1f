import { expect, test } from "vitest";
import { Html, html } from "../../../src/writers/comparison-page/html.js";

test("escapes text, in elements and in attributes", () => {
  const text = `<b title="x">'&'</b>`;
  const escaped = "&lt;b title=&quot;x&quot;&gt;&#39;&amp;&#39;&lt;/b&gt;";
  expect(html`<i title="${text}">${text}</i>`.markup).toBe(`<i title="${escaped}">${escaped}</i>`);
});

test("puts markup in as it is, joins lists, leaves out what is undefined", () => {
  const items = ["<", ">"].map((each) => html`<li>${each}</li>`);
  expect(html`<ul>${items}</ul>${undefined}${new Html("<hr>")}${0}`.markup).toBe(
    "<ul><li>&lt;</li><li>&gt;</li></ul><hr>0",
  );
});

test("keeps carriage returns, leaves out what HTML does not allow", () => {
  expect(html`${"a\r\nb\u0000\u001b\tc"}`.markup).toBe("a&#13;\nb\tc");
});
