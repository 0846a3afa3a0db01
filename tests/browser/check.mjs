// Opens pages in a real browser and tells what is wrong with them, a line each; nothing if all is well.
//
//   node check.mjs BROWSER FOLDER PAGE...      with SHOTS=FOLDER screenshots and a PDF are kept there
import { createRequire } from "node:module";
import { readFileSync, mkdirSync } from "node:fs";
import { basename, resolve } from "node:path";
import { pathToFileURL } from "node:url";
import { touch } from "./touch.mjs";

const [browserPath, modules, ...pages] = process.argv.slice(2);
const require = createRequire(resolve(modules) + "/");
const { chromium } = require("playwright-core");
const axe = readFileSync(require.resolve("axe-core/axe.min.js"), "utf8");
const shots = process.env.SHOTS;
if (shots) mkdirSync(shots, { recursive: true });

const faults = [];
const tried = { firings: 0, marks: 0, enlarged: 0, heard: 0 };
const browser = await chromium.launch({ executablePath: browserPath, args: ["--no-sandbox"] });
for (const file of pages) {
  const address = pathToFileURL(resolve(file)).href;
  for (const colorScheme of ["light", "dark"]) {
    const context = await browser.newContext({ colorScheme });
    const page = await context.newPage();
    const fault = (what) => faults.push(`${basename(file)} (${colorScheme}): ${what}`);
    page.on("console", (message) => {
      if (message.type() === "error" || message.type() === "warning") fault(`console: ${message.text()}`);
    });
    page.on("pageerror", (error) => fault(`script: ${error.message}`));
    page.on("request", (request) => {
      const url = request.url();
      if (url !== address && !url.startsWith("data:") && !url.startsWith("blob:")) fault(`asks for ${url}`);
    });
    for (const width of [360, 800, 1600]) {
      await page.setViewportSize({ width, height: 900 });
      await page.goto(address);
      const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
      if (wide > 0) fault(`at ${width} px it is ${wide} px too wide`);
      // Words of a picture must stay in it, and not lie on each other.
      const words = await page.evaluate(() => {
        const found = [];
        for (const svg of document.querySelectorAll("svg.plot")) {
          const frame = svg.getBoundingClientRect();
          const boxes = [...svg.querySelectorAll("text")].map((text) => [text.textContent, text.getBoundingClientRect()]);
          for (const [words, box] of boxes) {
            if (box.left < frame.left - 1 || box.right > frame.right + 1 || box.bottom > frame.bottom + 1) {
              found.push(`${svg.dataset.kind}: "${words}" leaves the picture`);
            }
          }
          for (let i = 0; i < boxes.length; i++) {
            for (let j = i + 1; j < boxes.length; j++) {
              const [a, b] = [boxes[i][1], boxes[j][1]];
              const across = Math.min(a.right, b.right) - Math.max(a.left, b.left);
              const down = Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top);
              if (across > 1 && down > 0.35 * Math.min(a.height, b.height)) {
                found.push(`${svg.dataset.kind}: "${boxes[i][0]}" lies on "${boxes[j][0]}"`);
              }
            }
          }
        }
        return found;
      });
      words.forEach((what) => fault(`at ${width} px ${what}`));
      if (shots) await page.screenshot({ path: `${shots}/${basename(file, ".html")}-${width}-${colorScheme}.png`, fullPage: true });
    }
    if (colorScheme === "light") {
      await page.setViewportSize({ width: 1000, height: 900 });
      await page.goto(address);
      const here = await touch(page, fault);
      for (const what of Object.keys(tried)) tried[what] += here[what];
    }
    await page.evaluate(axe);
    const result = await page.evaluate(() => axe.run(document, { resultTypes: ["violations"] }));
    for (const violation of result.violations.filter((v) => ["serious", "critical"].includes(v.impact))) {
      fault(`${violation.id} (${violation.impact}): ${violation.nodes[0].target} ${violation.help}`);
    }
    if (colorScheme === "light") {
      const pdf = await page.pdf({ format: "A4", path: shots && `${shots}/${basename(file, ".html")}.pdf` });
      if (pdf.length < 5000) fault("the printed page is empty");
      // Without scripts nothing of the content may be missing: only buttons and readouts are made by them.
      await page.goto(address);
      await page.evaluate(() => document.querySelectorAll("button, .tools, .readout").forEach((one) => one.remove()));
      const plain = await browser.newContext({ javaScriptEnabled: false, viewport: page.viewportSize() });
      const still = await plain.newPage();
      await still.goto(address);
      const words = async (of) => (await of.locator("main").innerText()).replace(/\s+/g, " ").trim();
      const [without, having] = [await words(still), await words(page)];
      if (without.length < 200 || without !== having) fault(`without scripts ${without.length} characters are shown, with them ${having.length}`);
      await plain.close();
    }
    await context.close();
  }
}
await browser.close();
for (const [what, count] of Object.entries(tried)) if (!count) faults.push(`on no page anything was tried of: ${what}`);
faults.forEach((line) => console.log(line));
console.log(`${pages.length} pages looked at, ${JSON.stringify(tried)} tried, ${faults.length} faults`);
process.exit(faults.length ? 1 : 0);
