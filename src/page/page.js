// Nothing on this page needs this script. It tells the values of the mark nearest to the pointer, and plays a piece of the sound.
"use strict";
for (const svg of document.querySelectorAll("svg.plot")) {
  const out = document.createElement("p");
  out.className = "readout";
  svg.after(out);
  const panels = [];
  for (const group of svg.querySelectorAll("g[data-x]")) {
    const scale = (name) => {
      const [kind, low, high, from, to] = group.dataset[name].split(" ").map((part, k) => (k ? Number(part) : part));
      return (at) => {
        const share = (at - from) / (to - from);
        return kind === "log" ? low * Math.pow(high / low, share) : low + share * (high - low);
      };
    };
    const marks = [];
    for (const path of group.querySelectorAll(".dot,.fine,.ring,.cross,.square,.tick")) {
      for (const found of path.getAttribute("d").matchAll(/M(-?[\d.]+) (-?[\d.]+)/g)) {
        marks.push([Number(found[1]), Number(found[2]), path.dataset.series]);
      }
    }
    const titles = [...group.querySelectorAll("text")].slice(-2).map((text) => text.textContent);
    panels.push({ x: scale("x"), y: scale("y"), marks, titles });
  }
  svg.addEventListener("pointermove", (event) => {
    const matrix = svg.getScreenCTM();
    const shift = svg.querySelector("g[transform]").transform.baseVal[0].matrix.f;
    if (!matrix) return;
    const at = [(event.clientX - matrix.e) / matrix.a, (event.clientY - matrix.f) / matrix.d - shift];
    let best = null;
    for (const panel of panels) {
      for (const mark of panel.marks) {
        const away = Math.hypot(mark[0] - at[0], mark[1] - at[1]);
        if (away < 14 && (!best || away < best.away)) best = { away, mark, panel };
      }
    }
    const figure = (value) => Number(value.toPrecision(6)).toString();
    out.textContent = best
      ? best.mark[2] + ": " + figure(best.panel.x(best.mark[0])) + " | " + figure(best.panel.y(best.mark[1]))
      : "";
  });
  svg.addEventListener("pointerleave", () => { out.textContent = ""; });
}
for (const player of document.querySelectorAll("audio[data-places]")) {
  for (const place of JSON.parse(player.dataset.places)) {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = "hear " + place.words;
    button.addEventListener("click", () => {
      player.currentTime = Math.max(0, place.at_s - 0.3);
      player.play();
    });
    player.after(button);
  }
}
