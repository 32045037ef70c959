// SPDX-License-Identifier: GPL-3.0-or-later
// Opens one HTML file in Chromium with the network shut off and fails on any script error, console error or request for anything
// but the file itself. Checks that at least N canvases were drawn on, then takes a screenshot of the whole page.
//
//   node page_check.mjs PAGE.html OUT.png [--canvases N] [--width PIXELS] [--pdf OUT.pdf]
import { createRequire } from "node:module";
import { dirname, resolve } from "node:path";
import { fileURLToPath, pathToFileURL } from "node:url";

const here = dirname(fileURLToPath(import.meta.url));
const { chromium } = createRequire(resolve(here, "../../reports/web/package.json"))("playwright-core");

function option(name, fallback) {
  const at = process.argv.indexOf(name);
  return at < 0 ? fallback : process.argv[at + 1];
}
const [page_path, picture] = process.argv.slice(2);
if (!page_path || !picture) {
  console.error("usage: node page_check.mjs PAGE.html OUT.png [--canvases N] [--width PIXELS] [--pdf OUT.pdf]");
  process.exit(2);
}
const wanted = Number(option("--canvases", "0"));
const width = Number(option("--width", "1140"));
const address = pathToFileURL(resolve(page_path)).href;

const problems = [];
const browser = await chromium.launch({
  executablePath: "/usr/bin/chromium",
  headless: true,
  args: ["--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update",
    "--disable-sync", "--no-first-run", "--disable-dev-shm-usage", "--host-resolver-rules=MAP * ~NOTFOUND"],
});
try {
  const context = await browser.newContext({ viewport: { width, height: 900 }, offline: true });
  await context.route("**/*", (route) => {
    const url = route.request().url();
    if (url === address || url.startsWith("data:")) return route.continue();
    problems.push(`request for ${url}`);
    return route.abort();
  });
  const page = await context.newPage();
  page.on("console", (message) => { if (["error", "warning"].includes(message.type())) problems.push(`console: ${message.text()}`); });
  page.on("pageerror", (error) => problems.push(`script error: ${error.message}`));
  await page.goto(address, { waitUntil: "load", timeout: 60000 });
  await page.waitForTimeout(300);

  // A canvas counts as drawn when a data colour is on it, not only the frame's text and lines: at least three colours and
  // a thousandth of its pixels.
  const drawn = await page.evaluate(() => [...document.querySelectorAll("canvas")].map((canvas) => {
    const pixels = canvas.getContext("2d").getImageData(0, 0, canvas.width, canvas.height).data;
    const colours = new Set();
    let inked = 0;
    for (let i = 0; i < pixels.length; i += 4) {
      if (pixels[i + 3] < 128) continue;
      ++inked;
      colours.add((pixels[i] >> 4) * 256 + (pixels[i + 1] >> 4) * 16 + (pixels[i + 2] >> 4));
    }
    return { inked: inked / (canvas.width * canvas.height), colours: colours.size, width: canvas.width };
  }));
  const good = drawn.filter((canvas) => canvas.inked > 0.001 && canvas.colours >= 3).length;
  if (good < wanted || good < drawn.length) problems.push(`${good} of ${drawn.length} canvases are drawn on, ${wanted} wanted`);
  const wide = await page.evaluate(() => document.documentElement.scrollWidth - document.documentElement.clientWidth);
  if (wide > 0) problems.push(`the page is ${wide} pixels wider than its window`);

  await page.screenshot({ path: picture, fullPage: true });
  const pdf = option("--pdf", null);
  if (pdf) await page.pdf({ path: pdf, preferCSSPageSize: true, printBackground: true });
  console.log(`${drawn.length} canvases, ${good} drawn`);
} finally {
  await browser.close();
}
for (const problem of problems) console.error(problem);
process.exit(problems.length > 0 ? 1 : 0);
