import { createHash } from "node:crypto";
import { escapeXml } from "../figures/svg.js";
import type { PackedReport } from "./pack.js";

/** The browser's side, as it was bundled. */
export interface PageParts {
  readonly script: string;
  readonly style: string;
}

/** JSON that no HTML parser can read as anything else: `<` cannot end the element, and line separators cannot end a line. */
export const safeJson = (value: unknown): string =>
  JSON.stringify(value)
    .replace(/</g, "\\u003c")
    .replace(/\u2028/g, "\\u2028")
    .replace(/\u2029/g, "\\u2029");

const hashOf = (text: string): string => `'sha256-${createHash("sha256").update(text).digest("base64")}'`;

/** The page in pieces, to be written one after the other. It fetches nothing: its policy allows its own script and style, by their hashes,
 *  and images made in the page. */
export function* reportDocument(packed: PackedReport, page: PageParts): Generator<string, void> {
  const names = packed.index.cooldowns.map((c) => c.info.cooldown);
  const title = `${names.length <= 3 ? names.join(", ") : `${names.length} cooldowns`} – coldseam report`;
  const script = inline(page.script, "script");
  const style = inline(page.style, "style");
  const policy = [
    "default-src 'none'",
    `script-src ${hashOf(script)}`,
    `style-src ${hashOf(style)}`,
    "img-src data: blob:",
    "base-uri 'none'",
    "form-action 'none'",
  ].join("; ");
  yield `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="${policy}">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="referrer" content="no-referrer">
<title>${escapeXml(title)}</title>
<style>${style}</style>
</head>
<body>
<noscript><p>This page draws its figures with its own script, which is part of the file. Allow scripts for this file to read it.</p></noscript>
<div id="page"></div>
<script type="application/json" id="index">${safeJson(packed.index)}</script>
`;
  for (const [k, chunk] of packed.chunks.entries())
    yield `<script type="text/plain" id="chunk-${k}">${chunk}</script>\n`;
  yield `<script>${script}</script>\n</body>\n</html>\n`;
}

/** Refuses a bundle that would end its own element. */
function inline(text: string, element: string): string {
  if (text.toLowerCase().includes(`</${element}`) || text.includes("<!--"))
    throw new RangeError(`the page's ${element} cannot stand inside its element`);
  return text;
}
