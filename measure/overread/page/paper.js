// The paper: picture, trace, panels and beats in millimetres; zoom and pan.

import { svg } from "./draw.js";
import { Tiles } from "./tiles.js";
import { CLOSE_PX_PER_MM, traceOf } from "./trace.js";

const CLOSEST_MM = 12, AROUND_MM = 4;

export class Paper {
  constructor(root, canvas, on) {
    this.root = root;
    this.on = on; // place(x, y), panel(number), beat(beat), edge(panel, side, x_mm)
    this.tiles = new Tiles(canvas, () => this.#frame());
    this.layers = {};
    for (const name of ["trace", "panels", "beats", "marks", "tool"]) {
      this.layers[name] = svg("g", {});
    }
    const stripes = svg("path", { d: "M0 2L2 0", class: "hatch" });
    const size = { id: "hatch", width: 2, height: 2, patternUnits: "userSpaceOnUse" };
    root.replaceChildren(
      svg("defs", {}, svg("pattern", size, stripes)), ...Object.values(this.layers));
    this.view = "flat";
    this.box = [0, 0, 100, 100];
    this.pointers = new Map();
    root.addEventListener("wheel", (event) => this.#wheel(event), { passive: false });
    root.addEventListener("pointerdown", (event) => this.#down(event));
    root.addEventListener("pointermove", (event) => this.#move(event));
    root.addEventListener("pointerup", (event) => this.#up(event));
    root.addEventListener("pointercancel", (event) => this.pointers.delete(event.pointerId));
    new ResizeObserver(() => this.#frame()).observe(root);
  }

  open(number, ecg) {
    this.box = [];
    this.number = number;
    this.ecg = ecg;
    this.view = ecg.paper.flat ? "flat" : "scan";
    this.#picture();
    this.fit();
  }

  show(ecg, selected, doubted) {
    const turned = this.ecg?.paper.turn_deg !== ecg.paper.turn_deg;
    this.ecg = ecg;
    if (turned) {
      this.box = [];
      this.#picture();
      this.fit();
    }
    const flat = this.view === "flat";
    this.layers.trace.replaceChildren(...(flat ? ecg.panels.flatMap((panel) => traceOf(panel, this.close)) : []));
    this.layers.panels.replaceChildren(
      ...(flat ? ecg.panels.flatMap((panel) => this.#panel(panel, selected, doubted)) : []));
    this.layers.beats.replaceChildren(...(flat ? this.#beats(ecg) : []));
    if (!flat) this.layers.marks.replaceChildren();
  }

  fit(box) {
    const { paper, panels } = this.ecg, flat = this.view === "flat";
    const whole = flat ? ruled(paper) : [0, 0, ...paper.scan.px];
    const close = flat && panels.length ? around(panels) : whole;
    const again = !box && String(this.box) === String(close); // a second time: the whole page
    this.box = [...(box ?? (again ? whole : close))];
    this.#frame();
  }

  turn() {
    this.view = this.view === "flat" ? "scan" : "flat";
    this.box = [];
    this.#picture();
    this.fit();
    return this.view;
  }

  strength(share) {
    this.layers.trace.setAttribute("opacity", share);
  }

  blink(visible) {
    this.layers.trace.setAttribute("visibility", visible ? "visible" : "hidden");
  }

  zoom(factor, x, y) {
    const [left, top, width, height] = this.box;
    const [atX, atY] = [x ?? left + width / 2, y ?? top + height / 2];
    const least = this.view === "flat" ? CLOSEST_MM : CLOSEST_MM * 10;
    const by = Math.max(factor, least / Math.max(width, height));
    this.box = [atX - (atX - left) * by, atY - (atY - top) * by, width * by, height * by];
    this.#frame();
  }

  pan(x, y) {
    this.box[0] += x * this.box[2];
    this.box[1] += y * this.box[3];
    this.#frame();
  }

  // Bring a panel into view with some paper around it.
  seek(number) {
    const [left, top, right, bottom] = this.ecg.panels[number].box_mm;
    this.fit([left - 8, top - 8, right - left + 16, bottom - top + 16]);
  }

  place(event) {
    const { left, top, width, height } = this.root.getBoundingClientRect();
    const scale = Math.min(width / this.box[2], height / this.box[3]);
    const from = (at, room, k) => this.box[k] + this.box[k + 2] / 2 + (at - room / 2) / scale;
    return [from(event.clientX - left, width, 0), from(event.clientY - top, height, 1)];
  }

  // Vertical bars on every averaged beat of a lead, at times in seconds of the recording.
  evidence(marks) {
    const bars = [];
    for (const { lead, time_s } of marks) {
      for (const panel of this.ecg.panels) {
        const x = xOf(panel, time_s);
        if (panel.lead !== lead || x < panel.box_mm[0] || x > panel.box_mm[2]) continue;
        bars.push(svg("line", { class: "evidence", x1: x, x2: x,
          y1: panel.baseline_mm - 9, y2: panel.baseline_mm + 9 }));
      }
    }
    this.layers.marks.replaceChildren(...bars);
  }

  #picture() {
    const { paper } = this.ecg;
    for (const name of ["trace", "panels", "beats", "marks"]) this.layers[name].replaceChildren();
    const flat = this.view === "flat", { px } = paper[this.view];
    const name = `${this.number} ${this.view} ${paper.turn_deg}`;
    this.tiles.show({ number: this.number, view: this.view, name, px,
      box: flat ? paper.flat.box : [0, 0, ...px] });
  }

  // Everything moves together, once for each frame of the screen.
  #frame() {
    this.due ??= requestAnimationFrame(() => {
      this.due = null;
      if (!this.ecg?.paper) return;
      const { clientWidth, clientHeight } = this.root;
      const scale = Math.min(clientWidth / this.box[2], clientHeight / this.box[3]);
      this.#detail(scale > CLOSE_PX_PER_MM);
      this.root.style.setProperty("--px-per-unit", scale.toFixed(2));
      this.root.setAttribute("viewBox", this.box.join(" "));
      this.tiles.draw(this.box);
    });
  }

  #detail(close) {
    if (close === this.close) return;
    this.close = close;
    for (const path of this.layers.trace.querySelectorAll(".trace")) {
      path.setAttribute("d", close ? path.forms.full : path.forms.far);
    }
  }

  #panel(panel, selected, doubted) {
    const [left, top, right, bottom] = panel.box_mm;
    const parts = [];
    const area = { x: left, y: top, width: right - left, height: bottom - top };
    if (doubted.includes(panel.number)) parts.push(svg("rect", { class: "doubtbox", ...area }));
    if (panel.number === selected) parts.push(svg("rect", { class: "selected", ...area }));
    for (const [side, x] of [["left", left], ["right", right]]) {
      const grip = panel.number === selected;
      parts.push(svg("line", { class: grip ? "edge grip" : "edge", x1: x, x2: x,
        y1: top, y2: bottom, "data-panel": panel.number, "data-side": grip ? side : null }));
    }
    const name = panel.lead + (panel.strip ? " strip" : "") + (panel.upside_down ? " ⇅" : "")
      + ({ assumed: " ?", given: " (given)" }[panel.lead_source] ?? "");
    parts.push(svg("text", { class: `name ${panel.lead_source}`, x: left + 1, y: top + 3.6,
      "data-panel": panel.number }, name));
    return parts;
  }

  #beats(ecg) {
    const dots = [];
    for (const beat of ecg.beats) {
      for (const panel of ecg.panels.filter((p) => p.baseline_mm !== undefined)) {
        const x = xOf(panel, beat.time_s);
        if (x < panel.box_mm[0] || x > panel.box_mm[2]) continue;
        const dot = svg("circle", { class: beat.averaged ? "heartbeat averaged" : "heartbeat",
          cx: x, cy: panel.box_mm[3] - 2.2, r: 1.1, "data-beat": beat.time_s });
        dot.append(svg("title", {}, `${beat.kind} beat at ${beat.time_s.toFixed(2)} s, `
          + (beat.averaged ? "averaged" : "not averaged")));
        dots.push(dot);
      }
    }
    return dots;
  }

  #wheel(event) {
    event.preventDefault();
    this.zoom(Math.exp(event.deltaY * 0.0015), ...this.place(event));
  }

  #down(event) {
    this.pointers.set(event.pointerId, event);
    this.moved = false;
    this.grip = event.target.dataset?.side ? { ...event.target.dataset } : null;
    this.root.setPointerCapture(event.pointerId);
    this.pressed = event.target;
  }

  #move(event) {
    const before = this.pointers.get(event.pointerId);
    if (!before) return this.on.hover(...this.place(event));
    const apart = Math.hypot(event.clientX - before.clientX, event.clientY - before.clientY);
    if (!this.moved && apart < 4) return undefined;
    this.moved = true;
    if (this.grip) {
      const x = this.place(event)[0];
      this.pressed.setAttribute("x1", x);
      this.pressed.setAttribute("x2", x);
      return undefined;
    }
    const [fromX, fromY] = this.place(before);
    const [toX, toY] = this.place(event);
    if (this.pointers.size === 2) {
      const [other] = [...this.pointers].filter(([id]) => id !== event.pointerId).map(([, e]) => e);
      const distance = (e) => Math.hypot(e.clientX - other.clientX, e.clientY - other.clientY);
      this.zoom(distance(before) / Math.max(distance(event), 1), ...this.place(other));
    } else {
      this.box[0] -= toX - fromX;
      this.box[1] -= toY - fromY;
      this.#frame();
    }
    this.pointers.set(event.pointerId, event);
    return undefined;
  }

  #up(event) {
    this.pointers.delete(event.pointerId);
    const [x, y] = this.place(event);
    if (this.grip && this.moved) this.on.edge(Number(this.grip.panel), this.grip.side, x);
    else if (!this.moved) this.on.click(x, y, this.pressed.dataset ?? {});
    this.grip = null;
  }
}

// The ruled area with some paper around it.
function ruled({ ruled_mm: [left, top, right, bottom] }) {
  return [left - AROUND_MM, top - AROUND_MM, right - left + 2 * AROUND_MM,
    bottom - top + 2 * AROUND_MM];
}

// The panels with some paper around them.
function around(panels) {
  const far = (k, most) => most(...panels.map(({ box_mm }) => box_mm[k]));
  const [left, top] = [far(0, Math.min) - 3 * AROUND_MM, far(1, Math.min) - AROUND_MM];
  return [left, top, far(2, Math.max) + AROUND_MM - left, far(3, Math.max) + AROUND_MM - top];
}

export const xOf = (panel, time_s) =>
  panel.box_mm[0] + (time_s - panel.start_s) * panel.speed_mm_s;
