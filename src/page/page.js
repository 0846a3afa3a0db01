// Nothing on this page needs this script. It tells the values of the mark nearest to the pointer, shows a part of a drawing larger,
// and plays a piece of the sound.
"use strict";
const SVG = "http://www.w3.org/2000/svg";
const PREFIXES = [["M", 1e6], ["k", 1e3], ["", 1], ["m", 1e-3], ["µ", 1e-6], ["n", 1e-9]];
// Drawings over the time of the recording can be enlarged, up to so many times.
const OVER_TIME = ["excerpts", "recording", "periods"];
const LARGEST = 40;

function shown(value, unit) {
  const round = (number, digits) => Number(number.toPrecision(digits)).toString();
  if (unit === "%") return round(100 * value, 5) + " %";
  if (!unit) return round(value, 6);
  const [prefix, factor] = PREFIXES.find(([, size]) => Math.abs(value) >= size) || ["", 1];
  return round(value / factor, 7) + " " + prefix + unit;
}

// A panel of a drawing: its frame, its scales, and the stretch [from, to] of its x axis that is shown, as shares of the whole.
class Panel {
  constructor(svg, group) {
    this.svg = svg;
    this.group = group;
    this.x = this.scale(group.dataset.x);
    this.y = this.scale(group.dataset.y);
    this.titles = [...group.querySelectorAll(":scope > text")].slice(-2).map((text) => text.textContent);
    this.labels = [...group.querySelectorAll("text.at-x")];
    this.paths = [...group.querySelectorAll("path:not(.axis)")].map((path) => [path, path.getAttribute("d")]);
    this.view = [0, 1];
    this.found = null;
  }

  scale(text) {
    const [kind, ...numbers] = text.split(" ");
    const [low, high, from, to] = numbers.map(Number);
    return { log: kind === "log", low, high, from, to };
  }

  static value({ log, low, high }, share) {
    return log ? low * Math.pow(high / low, share) : low + share * (high - low);
  }

  atX(place) {
    const share = (place - this.x.from) / (this.x.to - this.x.from);
    return Panel.value(this.x, this.view[0] + share * (this.view[1] - this.view[0]));
  }

  atY(place) {
    return Panel.value(this.y, (place - this.y.from) / (this.y.to - this.y.from));
  }

  holds([x, y]) {
    return x >= this.x.from && x <= this.x.to && y <= this.y.from && y >= this.y.to;
  }

  marks() {
    if (this.found) return this.found;
    const found = [];
    for (const [path] of this.paths) {
      if (!/^(dot|fine|ring|cross|square|tick)$/.test(path.getAttribute("class"))) continue;
      for (const [, x, y] of path.getAttribute("d").matchAll(/M(-?[\d.]+) (-?[\d.]+)/g)) {
        if (x >= this.x.from && x <= this.x.to) found.push([Number(x), Number(y), path.dataset.series]);
      }
    }
    this.found = found;
    return found;
  }

  // Shows a stretch: every place in a path that is not relative to another moves along x.
  show(low, high) {
    const width = Math.max(1 / LARGEST, Math.min(1, high - low));
    low = Math.max(0, Math.min(1 - width, low));
    this.view = [low, low + width];
    this.found = null;
    const { from, to } = this.x;
    const whole = width > 0.999;
    const moved = (place) => {
      const share = ((place - from) / (to - from) - low) / width;
      return (from + share * (to - from)).toFixed(2);
    };
    for (const [path, as_drawn] of this.paths) {
      const d = as_drawn.replace(/([ML])(-?[\d.]+) |H(-?[\d.]+)/g, (_, pen, x, h) =>
        pen ? pen + moved(x) + " " : "H" + moved(h));
      path.setAttribute("d", whole ? as_drawn : d);
      if (whole) path.removeAttribute("clip-path");
      else path.setAttribute("clip-path", this.clip());
    }
    this.group.querySelectorAll(".new-at-x").forEach((text) => text.remove());
    this.labels.forEach((text) => { text.style.display = whole ? "" : "none"; });
    if (!whole) this.label();
  }

  clip() {
    if (!this.clipping) {
      const clip = document.createElementNS(SVG, "clipPath");
      clip.id = "frame-" + document.querySelectorAll("clipPath").length;
      const frame = document.createElementNS(SVG, "rect");
      const { from, to } = this.x;
      const sizes = { x: from, y: this.y.to, width: to - from, height: this.y.from - this.y.to };
      Object.entries(sizes).forEach(([name, value]) => frame.setAttribute(name, value));
      clip.append(frame);
      this.group.append(clip);
      this.clipping = "url(#" + clip.id + ")";
    }
    return this.clipping;
  }

  // Ticks, labels and grid of the stretch that is shown, in the unit of the title.
  label() {
    const unit = this.titles[0].match(/, (\D?)\w+$/);
    const factor = (unit && PREFIXES.find(([prefix]) => prefix === unit[1]) || ["", 1])[1];
    const [low, high] = [this.atX(this.x.from) / factor, this.atX(this.x.to) / factor];
    const rough = (high - low) / 5;
    const power = Math.pow(10, Math.floor(Math.log10(rough)));
    const step = [1, 2, 5, 10].map((digit) => digit * power).find((size) => size >= rough);
    let grid = "";
    for (let k = Math.ceil(low / step); k * step <= high; k++) {
      const place = this.x.from + ((k * step - low) / (high - low)) * (this.x.to - this.x.from);
      grid += "M" + place.toFixed(2) + " " + this.y.from + "V" + this.y.to;
      const text = document.createElementNS(SVG, "text");
      const facts = { class: "new-at-x", x: place.toFixed(2), y: this.y.from + 17, "text-anchor": "middle" };
      Object.entries(facts).forEach(([name, value]) => text.setAttribute(name, value));
      text.textContent = (k * step).toFixed(Math.max(0, -Math.floor(Math.log10(step) + 1e-9)));
      this.labels[0].after(text);
    }
    const [path, as_drawn] = this.paths.find(([one]) => one.classList.contains("grid"));
    path.setAttribute("d", grid + (as_drawn.match(/M[^MV]*H[^M]*/g) || []).join(""));
  }
}

// What the report in this page tells of the firing at a time, if it is among those that are kept.
let report;
function firing(svg, time_s, within_s) {
  report = report || JSON.parse(document.getElementById("gaptone-report").textContent);
  const number = (svg.closest("figure").id.match(/^r(\d+)-/) || [0, 1])[1] - 1;
  const kept = report.recordings ? report.recordings[number].evidence.firings.kept : [];
  const away = (one) => Math.abs(one[0] - time_s);
  const best = kept.reduce((best, one) => (best && away(best) <= away(one) ? best : one), null);
  if (!best || away(best) > within_s) return null;
  const [at_s, period_s, size, voltage_v] = best;
  const voltage = voltage_v === null ? "" : ", gap voltage " + shown(voltage_v, "V");
  return "firing at " + at_s + " s: period " + shown(period_s, "s") + ", size " + size + voltage;
}

function words(svg, panel, [x, y, series]) {
  const { from, to } = panel.x;
  const grain = (panel.atX(to) - panel.atX(from)) / (to - from);
  if (series === "periods" || series === "firing") {
    const known = firing(svg, panel.atX(x), 0.03 * grain);
    if (known) return known;
  }
  const { xu, yu } = panel.group.dataset;
  const title = (text, unit) => (unit ? text.replace(/, [^,]*$/, "") : text);
  const told = title(panel.titles[0], xu) + " " + shown(panel.atX(x), xu);
  // Marks of events stand above the audio: their height tells nothing.
  const level = svg.dataset.kind === "excerpts" || series === "missed" || series === "extra";
  return series + ": " + told + (level ? "" : "; " + title(panel.titles[1], yu) + " " + shown(panel.atY(y), yu));
}

function button(label, action) {
  const made = document.createElement("button");
  made.type = "button";
  made.textContent = label;
  made.addEventListener("click", action);
  return made;
}

function hear(player, time_s) {
  player.currentTime = Math.max(0, time_s);
  player.play();
}

// The place of the pointer in the units of the drawing.
function place(svg, event) {
  const matrix = svg.getScreenCTM();
  const shift = svg.querySelector("g[transform]").transform.baseVal[0].matrix.f;
  return matrix ? [(event.clientX - matrix.e) / matrix.a, (event.clientY - matrix.f) / matrix.d - shift] : [-1, -1];
}

function readable(svg, panels) {
  const out = document.createElement("p");
  out.className = "readout";
  svg.after(out);
  svg.addEventListener("pointermove", (event) => {
    const at = place(svg, event);
    let best = null;
    for (const panel of panels) {
      for (const mark of panel.marks()) {
        const away = Math.hypot(mark[0] - at[0], mark[1] - at[1]);
        if (away < 14 && (!best || away < best.away)) best = { away, mark, panel };
      }
    }
    out.textContent = best ? words(svg, best.panel, best.mark) : "";
  });
  svg.addEventListener("pointerleave", () => { out.textContent = ""; });
}

function enlargeable(svg, panels) {
  const all = (change) => () => panels.forEach((panel) => {
    const [low, high] = panel.view;
    panel.show(...change(0.5 * (low + high), high - low));
  });
  const tools = document.createElement("p");
  tools.className = "tools";
  tools.append(
    button("zoom in", all((middle, width) => [middle - width / 4, middle + width / 4])),
    button("zoom out", all((middle, width) => [middle - width, middle + width])),
    button("earlier", all((middle, width) => [middle - width, middle])),
    button("later", all((middle, width) => [middle, middle + width])));
  const section = svg.closest("section");
  const player = section && section.querySelector("audio[data-places]");
  if (player) tools.append(button("hear from its beginning", () => hear(player, panels[0].atX(panels[0].x.from))));
  svg.closest(".drawing").append(tools);
  // With a mouse a stretch is chosen by drawing over it, and a double click shows all again.
  let start = null;
  svg.addEventListener("pointerdown", (event) => {
    const at = place(svg, event);
    const panel = panels.find((one) => one.holds(at));
    start = panel && event.pointerType !== "touch" ? { panel, x: at[0] } : null;
  });
  svg.addEventListener("pointerup", (event) => {
    if (!start) return;
    const { panel, x } = start;
    const ends = [x, place(svg, event)[0]].sort((a, b) => a - b);
    start = null;
    if (ends[1] - ends[0] < 8) return;
    const [low, high] = panel.view;
    panel.show(...ends.map((end) => low + ((end - panel.x.from) / (panel.x.to - panel.x.from)) * (high - low)));
  });
  svg.addEventListener("dblclick", () => panels.forEach((panel) => panel.show(0, 1)));
}

for (const svg of document.querySelectorAll("svg.plot")) {
  const panels = [...svg.querySelectorAll("g[data-x]")].map((group) => new Panel(svg, group));
  readable(svg, panels);
  if (OVER_TIME.includes(svg.dataset.kind)) enlargeable(svg, panels);
}
for (const player of document.querySelectorAll("audio[data-places]")) {
  for (const { words, at_s } of JSON.parse(player.dataset.places).reverse()) {
    player.after(button("hear " + words, () => hear(player, at_s - 0.3)));
  }
}
