// Touches a page as a person does: moves the mouse over a mark, enlarges a drawing, presses "hear". Gives what was tried, and calls
// `fault` for each thing that does not answer as the figures in the page say.

/// Where a mark of a series lies on the screen, and its values by the scales of its panel; null if there is no such mark.
async function markAt(drawing, series, share) {
  return drawing.evaluate((svg, [series, share]) => {
    svg.scrollIntoView({ block: "center" });
    const path = svg.querySelector(`path[data-series="${series}"]`);
    const found = path && [...path.getAttribute("d").matchAll(/M(-?[\d.]+) (-?[\d.]+)/g)].map((m) => [+m[1], +m[2]]);
    const group = path && path.closest("g[data-x]");
    if (!found || !found.length) return null;
    const value = (text, at) => {
      const [kind, low, high, from, to] = text.split(" ").map((part, k) => (k ? +part : part));
      const part = (at - from) / (to - from);
      return kind === "log" ? low * (high / low) ** part : low + part * (high - low);
    };
    const [from, to] = group.dataset.x.split(" ").slice(3).map(Number);
    const inside = found.filter(([x]) => x >= from && x <= to);
    const [x, y] = inside[Math.floor(share * (inside.length - 1))];
    const matrix = svg.getScreenCTM();
    const screen = [matrix.e + matrix.a * x, matrix.f + matrix.d * y];
    // Where a part is shown, its own labels are the scale.
    const labels = [...group.querySelectorAll(".new-at-x")].map((t) => [+t.getAttribute("x"), +t.textContent]).sort((a, b) => a[0] - b[0]);
    let at = value(group.dataset.x, x);
    if (labels.length) {
      const [[x1, v1], [x2, v2]] = [labels[0], labels[labels.length - 1]];
      const milli = [...group.querySelectorAll("text")].some((text) => text.textContent.endsWith(", ms"));
      const of_title = milli && svg.dataset.kind === "excerpts" ? 1e-3 : 1;
      at = of_title * (v1 + ((x - x1) / (x2 - x1)) * (v2 - v1));
    }
    return { screen, x: at, y: value(group.dataset.y, y), count: inside.length };
  }, [series, share]);
}

async function readoutAt(page, drawing, [x, y]) {
  await page.mouse.move(x, y);
  return drawing.evaluate((svg) => svg.closest(".drawing").querySelector(".readout").textContent);
}

/// A figure with its prefix, as a number of its unit.
function figure(text) {
  const [, number, prefix] = text.match(/^(-?[\d.e-]+) ?([Mkmµn]?)[A-Za-z%]*$/);
  return Number(number) * ({ M: 1e6, k: 1e3, m: 1e-3, "µ": 1e-6, n: 1e-9 }[prefix] ?? 1);
}

const near = (a, b, part = 1e-5) => Math.abs(a - b) <= part * Math.abs(b);

/// The mark of a firing tells the figures of that firing; false if there is none to ask.
async function asksFiring(page, drawing, series, kept, fault) {
  const mark = await markAt(drawing, series, 0.6);
  if (!mark) return false;
  const said = await readoutAt(page, drawing, mark.screen);
  const parts = said.match(/^firing at ([\d.]+) s: period ([^,]+), size ([\d.]+)(?:, gap voltage (.+))?$/);
  const wanted = parts && kept.find(([time_s]) => time_s === Number(parts[1]));
  if (!wanted) {
    // The first firing, and one behind a missed one, have no single period to tell.
    const alone = said.match(/^firing: time in the recording (.+)$/);
    if (alone && Math.abs(figure(alone[1]) - mark.x) < 1e-4 && !kept.some(([time_s]) => Math.abs(time_s - mark.x) < 1e-5)) return true;
    fault(`the mark of a firing (${series}) tells "${said}"`);
    return true;
  }
  const [, period_s, size, voltage_v] = wanted;
  const right = near(figure(parts[2]), period_s) && Number(parts[3]) === size
    && (voltage_v === null ? parts[4] === undefined : near(figure(parts[4]), voltage_v));
  if (!right) fault(`"${said}" is not what the report holds: ${wanted}`);
  // The mouse may have met a neighbour where marks lie closer than the pointer is wide.
  if (mark.count < 40 && Math.abs(wanted[0] - mark.x) > 1e-4) fault(`"${said}" is not the firing at ${mark.x} s`);
  return true;
}

async function hears(page, fault) {
  const player = page.locator("audio[data-places]").first();
  if (!(await player.count())) return 0;
  const places = JSON.parse(await player.getAttribute("data-places"));
  let heard = 0;
  const at = () => player.evaluate(async (player) => {
    await new Promise((done) => setTimeout(done, 120));
    const { currentTime, paused } = player;
    player.pause();
    return { currentTime, paused };
  });
  for (const { words, at_s } of places) {
    await page.getByRole("button", { name: `hear ${words}` }).first().click();
    const { currentTime, paused } = await at();
    const wanted = Math.max(0, at_s - 0.3);
    if (currentTime < wanted - 0.02 || currentTime > wanted + 2 || paused) fault(`"hear ${words}" plays from ${currentTime} s`);
    heard++;
  }
  const clip = page.locator("figure", { has: page.locator("svg[data-kind=recording]") }).first();
  await clip.getByRole("button", { name: "zoom in" }).click();
  await clip.getByRole("button", { name: "hear from its beginning" }).click();
  const duration = await player.evaluate((player) => player.duration);
  const { currentTime } = await at();
  if (Math.abs(currentTime - duration / 4) > 0.1 * duration + 1) fault(`the quarter of ${duration} s is played from ${currentTime} s`);
  await clip.getByRole("button", { name: "zoom out" }).click();
  return heard + 1;
}

/// Enlarges by buttons and by drawing over a stretch, and goes back.
async function enlarges(page, kept, fault) {
  const figure = page.locator("figure", { has: page.locator("svg[data-kind=excerpts]") }).first();
  if (!(await figure.count())) return 0;
  const drawing = figure.locator("svg").first();
  const drawn = () => drawing.evaluate((svg) => [...svg.querySelectorAll("path")].map((path) => path.getAttribute("d")).join());
  const ends = () => drawing.evaluate((svg) => {
    const shown = [...svg.querySelector("g[data-x]").querySelectorAll(".at-x, .new-at-x")].filter((t) => t.style.display !== "none");
    const labels = shown.map((text) => [Number(text.getAttribute("x")), Number(text.textContent)]).sort((a, b) => a[0] - b[0]);
    const [[x1, v1], [x2, v2]] = [labels[0], labels[labels.length - 1]];
    // The axis goes on to the edges of the frame, with as much to a unit of the drawing as between the labels.
    const [left, right] = svg.querySelector("g[data-x]").dataset.x.split(" ").slice(3).map(Number);
    return [left, right].map((x) => v1 + ((x - x1) * (v2 - v1)) / (x2 - x1));
  });
  const [before, wide] = [await drawn(), await ends()];
  await figure.getByRole("button", { name: "zoom in" }).click();
  const [larger, narrow] = [await drawn(), await ends()];
  const share = (value) => (value - wide[0]) / (wide[1] - wide[0]);
  const is = (view, low, high) => Math.abs(share(view[0]) - low) < 0.02 && Math.abs(share(view[1]) - high) < 0.02;
  if (larger === before) fault("zoom in changes nothing");
  if (!is(narrow, 0.25, 0.75)) fault(`zoomed in the axis goes over ${narrow}, before ${wide}`);
  if (kept.length) await asksFiring(page, drawing, "firing", kept, fault);
  await figure.getByRole("button", { name: "later" }).click();
  const later = await ends();
  if (!is(later, 0.5, 1)) fault(`later shows ${later} after ${narrow}`);
  await figure.getByRole("button", { name: "zoom out" }).click();
  await figure.getByRole("button", { name: "zoom out" }).click();
  if ((await drawn()) !== before) fault("zooming out does not give the drawing back");
  const box = await drawing.evaluate((svg) => {
    svg.scrollIntoView({ block: "center" });
    const [left, right] = svg.querySelector("g[data-x]").dataset.x.split(" ").slice(3).map(Number);
    const bottom = Number(svg.querySelector("g[data-x]").dataset.y.split(" ")[3]);
    const m = svg.getScreenCTM();
    return { left: m.e + m.a * left, right: m.e + m.a * right, y: m.f + m.d * (bottom - 20) };
  });
  const x = (part) => box.left + part * (box.right - box.left);
  await page.mouse.move(x(0.5), box.y);
  await page.mouse.down();
  await page.mouse.move(x(0.7), box.y, { steps: 4 });
  await page.mouse.up();
  const chosen = await ends();
  if (!is(chosen, 0.5, 0.7)) fault(`drawing over half to 0.7 shows ${chosen} of ${wide}`);
  await page.mouse.dblclick(x(0.5), box.y);
  if ((await drawn()) !== before) fault("a double click does not give the drawing back");
  return 1;
}

/// Marks that are no firings tell their values by the scales.
async function asksMarks(page, fault) {
  let asked = 0;
  for (const [kind, series] of [["trend", "entries"], ["calibration", "used"], ["growth", "growth"]]) {
    const drawing = page.locator(`svg[data-kind=${kind}]`).first();
    if (!(await drawing.count())) continue;
    const mark = await markAt(drawing, series, 0.5);
    if (!mark) continue;
    const said = await readoutAt(page, drawing, mark.screen);
    const value = said.match(/^.*; .*? (-?[\d.]+(?: [Mkmµn]?[A-Za-z%]+)?)$/);
    if (!said.startsWith(`${series}: `) || !value || !near(figure(value[1]), mark.y, 1e-3)) {
      fault(`the mark of ${series} at ${mark.y} tells "${said}"`);
    }
    asked++;
  }
  return asked;
}

export async function touch(page, fault) {
  const tried = { firings: 0, marks: 0, enlarged: 0, heard: 0 };
  const kept = await page.evaluate(() => {
    const place = document.getElementById("gaptone-report");
    const report = place ? JSON.parse(place.textContent) : {};
    return report.recordings?.[0]?.evidence?.firings.kept ?? [];
  });
  for (const [kind, series] of [["periods", "periods"], ["excerpts", "firing"]]) {
    const drawing = page.locator(`svg[data-kind=${kind}]`).first();
    if (kept.length && (await drawing.count())) tried.firings += await asksFiring(page, drawing, series, kept, fault);
  }
  tried.marks += await asksMarks(page, fault);
  // Pages are alike in this, so those with a player stand for all.
  if (await page.locator("audio[data-places]").count()) {
    tried.enlarged += await enlarges(page, kept, fault);
    tried.heard += await hears(page, fault);
  }
  return tried;
}
