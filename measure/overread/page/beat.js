// The dominant beat of every lead at one scale, with boundaries to drag or to step by the keys.

import { pathOf, svg } from "./draw.js";

const NAMES = { p_on_ms: "P begins", p_off_ms: "P ends", qrs_on_ms: "QRS begins",
  qrs_off_ms: "QRS ends", t_off_ms: "T ends" };
const STEP_MS = 2, COLUMNS = 4, NAME_Y = 14;
const FROM_MS = -360, TO_MS = 560, SETTLED_MS = 350;

export class Beat {
  constructor(root, moved) {
    this.root = root;
    this.moved = moved; // (edge, at_ms)
    root.addEventListener("pointermove", (event) => this.#drag(event));
    root.addEventListener("pointerup", () => this.#drop());
    root.addEventListener("keydown", (event) => this.#key(event));
    new ResizeObserver(() => this.ecg && this.show(this.ecg)).observe(root);
  }

  // An earlier ECG behind the leads, at one scale and aligned on the QRS onset; null: none.
  beside(found) {
    this.old = found;
    if (this.ecg) this.show(this.ecg);
  }

  show(ecg) {
    this.ecg = ecg;
    this.beat = ecg.beat;
    this.at = { ...ecg.beat.edges };
    const leads = Object.keys(this.beat.mv);
    this.rows = Math.max(Math.ceil(leads.length / COLUMNS), 1);
    const focused = document.activeElement?.dataset?.edge;
    this.cell = [this.root.clientWidth / COLUMNS, this.root.clientHeight / this.rows];
    this.scale = scaleOf([...Object.values(this.beat.mv), ...Object.values(this.old?.beat.mv ?? {})]);
    this.cells = new Map(leads.map((lead, k) => [lead, [
      this.cell[0] * Math.floor(k / this.rows), this.cell[1] * (k % this.rows)]]));
    this.marks = svg("g", {});
    this.root.replaceChildren(
      ...leads.flatMap((lead) => this.#cell(lead, ecg)), this.marks, ...this.#handles());
    if (focused) this.root.querySelector(`[data-edge="${focused}"]`)?.focus();
  }

  // Marks over leads at times in ms after the QRS onset.
  evidence(places) {
    const lines = places.filter(({ lead }) => this.cells.has(lead)).map(({ lead, time_ms }) => {
      const [left, top] = this.cells.get(lead);
      if (time_ms === null) {
        return svg("rect", { class: "evidence", x: left + 2, y: top + 2,
          width: this.cell[0] - 4, height: this.cell[1] - 4 });
      }
      const x = left + this.#x(time_ms + this.at.qrs_on_ms);
      return svg("line", { class: "evidence", x1: x, x2: x, y1: top + 8, y2: top + this.cell[1] - 8 });
    });
    this.marks.replaceChildren(...lines);
  }

  #x(ms) {
    return (ms - FROM_MS) / (TO_MS - FROM_MS) * this.cell[0];
  }

  #cell(lead, ecg) {
    const [left, top] = this.cells.get(lead), { low, high } = this.scale;
    const y = (mv) => (top + this.cell[1] * (high - mv) / (high - low)).toFixed(2);
    const wave = ({ step_ms, mv }, start_ms) => {
      const at = (k) => start_ms + k * step_ms;
      const inside = (k) => at(k) >= FROM_MS && at(k) <= TO_MS;
      return pathOf((k) => left + this.#x(at(k)),
        (mv[lead] ?? []).map((v, k) => (v === null || !inside(k) ? null : y(v))));
    };
    const old = this.old && wave(this.old.beat, this.old.beat.start_ms + (this.at.qrs_on_ms ?? 0));
    const change = this.old?.beat_change_mv[lead];
    const parts = [
      svg("rect", { class: "cell", x: left, y: top, width: this.cell[0], height: this.cell[1] }),
      svg("text", { class: "leadname", x: left + 6, y: top + NAME_Y },
        `${lead}  ${ecg.beat.shapes[lead] ?? ""}  (${this.beat.beats[lead]})`
        + (change === undefined || change === null ? "" : `  Δ ${change.toFixed(2)} mV`)),
      old ? svg("path", { class: "wave old", d: old }) : svg("g", {}),
      svg("path", { class: "wave", d: wave(this.beat, this.beat.start_ms) }),
    ];
    for (const edge of Object.keys(NAMES)) {
      const line = (at, name) => svg("line", { class: name, x1: left + this.#x(at),
        x2: left + this.#x(at), y1: top + NAME_Y + 4, y2: top + this.cell[1] - 2, "data-of": edge });
      const auto = this.beat.automatic[edge], at = this.at[edge];
      if (auto !== null && auto !== at) parts.push(line(auto, "auto"));
      if (at !== null) parts.push(line(at, `bound ${edge[0]}`));
    }
    return parts;
  }

  // A broad, invisible grip over each boundary in each column; one of them takes the keys.
  #handles() {
    const handles = [];
    for (const [edge, name] of Object.entries(NAMES)) {
      if (this.at[edge] === null) continue;
      for (let column = 0; column * this.rows < this.cells.size; column += 1) {
        handles.push(svg("rect", { class: "handle", "data-edge": edge, width: 12,
          x: column * this.cell[0] + this.#x(this.at[edge]) - 6, y: 0, height: this.rows * this.cell[1],
          "data-column": column, ...(column ? {} : { tabindex: 0, role: "slider",
            "aria-label": name, "aria-valuemin": FROM_MS, "aria-valuemax": TO_MS,
            "aria-valuenow": Math.round(this.at[edge]),
            "aria-valuetext": `${Math.round(this.at[edge] - this.at.qrs_on_ms)} ms after QRS begins` }),
          onpointerdown: (event) => this.#grab(event, edge) }));
      }
    }
    return handles;
  }

  #grab(event, edge) {
    this.held = { edge, from: this.at[edge], x: event.clientX };
    this.root.setPointerCapture(event.pointerId);
    event.preventDefault();
    this.root.querySelector(`[data-edge="${edge}"][tabindex]`).focus();
  }

  #drag(event) {
    if (!this.held) return;
    const perMs = this.root.clientWidth / COLUMNS / (TO_MS - FROM_MS);
    const by = (event.clientX - this.held.x) / perMs;
    this.#place(this.held.edge, this.held.from + Math.round(by / STEP_MS) * STEP_MS);
  }

  #drop() {
    if (!this.held) return;
    const { edge, from } = this.held;
    this.held = null;
    if (this.at[edge] !== from) this.moved(edge, this.at[edge]);
  }

  #key(event) {
    const edge = event.target.dataset?.edge;
    const by = { ArrowLeft: -STEP_MS, ArrowRight: STEP_MS }[event.key];
    if (!edge || !by) return;
    event.preventDefault();
    event.stopPropagation();
    this.#place(edge, this.at[edge] + by * (event.shiftKey ? 5 : 1));
    clearTimeout(this.settle);
    this.settle = setTimeout(() => this.moved(edge, this.at[edge]), SETTLED_MS);
  }

  #place(edge, ms) {
    this.at[edge] = ms;
    for (const line of this.root.querySelectorAll(`.bound[data-of="${edge}"]`)) {
      const x = Math.floor(line.x1.baseVal.value / this.cell[0]) * this.cell[0] + this.#x(ms);
      line.setAttribute("x1", x);
      line.setAttribute("x2", x);
    }
    for (const handle of this.root.querySelectorAll(`[data-edge="${edge}"]`)) {
      handle.setAttribute("x", handle.dataset.column * this.cell[0] + this.#x(ms) - 6);
      if (handle.hasAttribute("role")) handle.setAttribute("aria-valuenow", Math.round(ms));
    }
  }
}

// What was found over all leads stands in each of them, where it begins and where it ends.
const SPANS = { QRS: ["qrs_on_ms", "qrs_off_ms"], PR: ["p_on_ms", "qrs_on_ms"],
  QT: ["qrs_on_ms", "t_off_ms"], QTc: ["qrs_on_ms", "t_off_ms"], P: ["p_on_ms", "p_off_ms"] };

export function inEachLead(places, { mv, edges }) {
  return places.flatMap((place) => {
    if (place.lead !== "overall") return [place];
    const ends = (SPANS[place.what.split(" ")[0]] ?? []).map((edge) => edges[edge])
      .filter((at) => at !== null);
    return Object.keys(mv).flatMap((lead) =>
      ends.map((at) => ({ lead, time_ms: at - edges.qrs_on_ms })));
  });
}

// One scale for all leads: from the lowest to the highest sample, a little air around.
function scaleOf(leads) {
  const values = leads.flat().filter((mv) => mv !== null);
  const low = Math.min(-0.2, ...extremes(values, Math.min));
  const high = Math.max(0.2, ...extremes(values, Math.max));
  const air = 0.08 * (high - low);
  return { low: low - air, high: high + 2 * air };
}

const extremes = (values, most) => (values.length ? [values.reduce((a, b) => most(a, b))] : []);
