// Tools that work by places on the paper. Each is fed by clicks, or by a cross that the arrow keys
// move and the space bar sets down.

import { svg } from "./draw.js";

export const TOOLS = {
  strike: { label: "Strike out", key: "s", points: 2, span: true,
    say: "Strike out: mark the beginning and the end of what cannot be read." },
  redraw: { label: "Redraw", key: "d", points: Infinity,
    say: "Redraw: mark points along the ink from left to right, then Enter." },
  ignore: { label: "Ignore", key: "i", points: 2, region: true,
    say: "Ignore: mark two opposite corners of a stamp or of handwriting." },
  crop: { label: "Crop", key: "x", points: 2, region: true,
    say: "Crop: mark two opposite corners of what belongs to the ECG." },
  caliper: { label: "Calipers", key: "c", points: 2, snaps: true,
    say: "Calipers: mark two places. Then m marches them along, k keeps the result." },
  scale: { label: "Scale", points: 2, anywhere: true,
    say: "No grid was found. Mark two places whose distance you know, then type it." },
};

export class Tool {
  constructor(paper, done) {
    this.paper = paper;
    this.done = done; // (name, panel, points)
    this.snap = false;
    this.stop();
  }

  start(name) {
    this.name = name;
    this.points = [];
    const [left, top, width, height] = this.paper.box;
    this.cross = [left + width / 2, top + height / 2];
    this.draw();
  }

  stop() {
    this.name = null;
    this.points = [];
    this.marching = false;
    this.words = "";
    this.paper.layers.tool.replaceChildren();
  }

  hover(x, y) {
    if (!this.name) return;
    this.cross = [x, y];
    this.draw();
  }

  step(x, y) {
    this.hover(this.cross[0] + x, this.cross[1] + y);
  }

  put(x = this.cross[0], y = this.cross[1]) {
    const last = this.points.at(-1), { points, snaps } = TOOLS[this.name];
    if (this.name === "redraw" && last && x <= last[0]) return "Points must run from left to right.";
    if (this.points.length >= points) this.points = [];
    this.points.push(snaps && this.snap ? this.#snapped(x, y) : [x, y]);
    this.marching = false;
    this.words = "";
    this.draw();
    return this.points.length === points ? this.finish() : null;
  }

  finish() {
    if (this.points.length < 2) return "Two places are needed.";
    const { region, anywhere } = TOOLS[this.name];
    const panel = panelAt(this.paper.ecg.panels, ...this.points[0]);
    if (!panel && !region && !anywhere) return "That is beside every panel: mark within one.";
    return this.done(this.name, panel, this.points);
  }

  march() {
    this.marching = this.name === "caliper" && this.points.length === 2 && !this.marching;
    this.draw();
  }

  draw(words = this.words) {
    this.words = words;
    const parts = [], [x, y] = this.cross;
    const arm = this.paper.box[2] / 100, { span, region } = TOOLS[this.name];
    const cross = `M${x - arm} ${y}H${x + arm}M${x} ${y - arm}V${y + arm}`;
    parts.push(svg("path", { class: "tooling", d: cross }));
    if (this.name === "redraw") {
      parts.push(svg("polyline", { class: "tooling", points: this.points.join(" ") }));
    } else if (!region) {
      for (const [at] of this.points) parts.push(this.#bar(at));
    }
    for (const [px, py] of this.points) {
      parts.push(svg("circle", { class: "tooling", cx: px, cy: py, r: arm / 3 }));
    }
    if ((span || region) && this.points.length === 1) parts.push(this.#reach(region));
    if (this.marching) parts.push(...this.#marched());
    if (words) {
      const [tx, ty] = this.points[1];
      parts.push(svg("text", { class: "measure", x: tx + 1.5, y: ty - 1.5 }, words));
    }
    this.paper.layers.tool.replaceChildren(...parts);
  }

  // From the first place to the cross: the full height for a span, both sides for a region.
  #reach(region) {
    const [x0, y0] = this.points[0], [x, y] = this.cross, [, top, , height] = this.paper.box;
    const down = region ? { y: Math.min(y0, y), height: Math.abs(y - y0) } : { y: top, height };
    return svg("rect", { class: "reach", x: Math.min(x0, x), width: Math.abs(x - x0), ...down });
  }

  // The height of the trace at a place, where a panel has one there.
  #snapped(x, y) {
    const panel = panelAt(this.paper.ecg.panels, x, y);
    const sample = panel?.y_mm?.[Math.round((x - panel.box_mm[0]) / panel.step_mm)];
    return [x, sample ?? y];
  }

  #bar(x) {
    const [, top, , height] = this.paper.box;
    return svg("line", { class: "tooling", x1: x, x2: x, y1: top, y2: top + height });
  }

  #marched() {
    const [[a], [b]] = this.points;
    const step = Math.abs(b - a), bars = [];
    if (step < 0.5) return bars;
    const [left, , width] = this.paper.box;
    for (let x = Math.max(a, b) + step; x < left + width; x += step) bars.push(this.#bar(x));
    for (let x = Math.min(a, b) - step; x > left; x -= step) bars.push(this.#bar(x));
    return bars;
  }
}

export const panelAt = (panels, x, y) => panels.find(({ box_mm: [left, top, right, bottom] }) =>
  x >= left && x <= right && y >= top && y <= bottom);

// Two opposite corners as the sides of a region.
export const sides = ([[x0, y0], [x1, y1]]) => ({ left_mm: Math.min(x0, x1),
  top_mm: Math.min(y0, y1), right_mm: Math.max(x0, x1), bottom_mm: Math.max(y0, y1) });
