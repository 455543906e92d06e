// Makes fixtures/readme/report.png: `node scripts/report_picture.mjs demo-output/report.html`.
import path from "node:path";
import { pathToFileURL } from "node:url";
import sharp from "sharp";
import { findChromium, openBrowser } from "./chromium.mjs";
import { top } from "./install_if_missing.mjs";

const file = process.argv[2];
const chromium = findChromium();
if (file === undefined || chromium === null) {
  console.error("usage: node scripts/report_picture.mjs REPORT.html (needs a Chromium)");
  process.exit(2);
}
const { page, close } = await openBrowser(chromium);
await page.goto(pathToFileURL(path.resolve(file)).href);
await page.waitForSelector("html[data-loaded]");
await page.locator(".ways button", { hasText: "wall" }).first().click();
await page.locator("#inspector svg").first().waitFor();
await page.evaluate(() => document.activeElement?.blur());
await page.waitForTimeout(300);
const shot = await page.screenshot();
await close();
const out = path.join(top, "fixtures/readme/report.png");
const { size } = await sharp(shot).png({ palette: true, colours: 192, effort: 10, compressionLevel: 9 }).toFile(out);
console.log(`${out}: ${size} bytes`);
