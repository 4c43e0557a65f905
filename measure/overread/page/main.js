// The page: one ECG of the worklist, its paper, its beat, its reading, and the keys.

import * as api from "./api.js";
import { Beat } from "./beat.js";
import { byId, html } from "./draw.js";
import { Paper } from "./paper.js";
import { showPanel, showSide } from "./side.js";
import { TOOLS, Tool, panelAt } from "./tools.js";

const POLL_MS = 700, BLINK_MS = 450, PAN = 0.12, FINE_MM = 0.2, COARSE_MM = 1;
const state = { number: null, ecg: null, panel: null, doubt: -1, blinking: null };

const paper = new Paper(byId("paper"), {
  click: clicked,
  hover: (x, y) => tool.hover(x, y),
  edge: (panel, side, x) => {
    const [left, , right] = state.ecg.panels[panel].box_mm;
    correct({ kind: "panel edges", panel, left_mm: side === "left" ? x : left,
      right_mm: side === "right" ? x : right });
  },
});
const tool = new Tool(paper, used);
const beat = new Beat(byId("beat"), (edge, at_ms) => correct({ kind: "boundary", edge, at_ms }));

const ACTIONS = [
  ["f", "Fit", () => paper.fit()],
  ["v", "As scanned", () => turned()],
  ["b", "Blink", () => blink()],
  ["n", "Next doubt", () => doubt(state.doubt + 1)],
  ["p", "Next panel", () => select(((state.panel ?? -1) + 1) % state.ecg.panels.length, true)],
  ["z", "Undo", () => change("undo")],
  ["Z", "Redo", () => change("redo")],
  ["+", "Closer", () => paper.zoom(0.8)],
  ["-", "Farther", () => paper.zoom(1.25)],
  ["m", "March the calipers", () => tool.march()],
  ["?", "Keys", () => byId("keys").showModal()],
  ...Object.entries(TOOLS).filter(([name]) => name !== "scale").map(([name, { key, label }]) => [key, label, () => take(name)]),
];
const ALSO = [["arrows", "Move the paper; in a tool, its cross (Shift: finely)"],
  ["space", "Set a point of the tool"], ["Enter", "Finish the redrawn stretch"],
  ["Escape", "Put the tool away"], ["left, right on a boundary", "2 ms (Shift: 10 ms)"]];

function clicked(x, y, data) {
  if (tool.name) return say(tool.put(x, y));
  if (data.beat !== undefined) return useBeat(Number(data.beat));
  const panel = data.panel ?? panelAt(state.ecg.panels, x, y)?.number;
  return select(panel === undefined ? null : Number(panel));
}

function useBeat(time_s) {
  const { averaged } = state.ecg.beats.find((found) => found.time_s === time_s);
  correct({ kind: "beat", time_s, use: !averaged });
}

function used(name, panel, points) {
  if (name === "scale") return askDistance(points);
  const xs = points.map(([x]) => x);
  if (name === "strike") {
    correct({ kind: "strike out", panel: panel.number, left_mm: Math.min(...xs),
      right_mm: Math.max(...xs) });
  } else if (name === "redraw") {
    correct({ kind: "redraw", panel: panel.number, points });
  } else {
    return measured(panel, points);
  }
  take(null);
  return null;
}

// A page without grid: two places, and how far apart a person knows them to be.
function unscaled(number, ecg) {
  state.ecg = { panels: [], beats: [], doubts: [], corrections: [], paper: {
    scan: { px: ecg.unscaled } } };
  byId("state").textContent = `${ecg.message}. Or show the scale here.`;
  paper.open(number, state.ecg);
  tool.start("scale");
  byId("paper").classList.add("tool");
  byId("paper").focus();
  say(TOOLS.scale.say);
}

function askDistance(points) {
  const input = html("input", { id: "distance", inputmode: "decimal", size: 6 });
  const form = html("form", {}, html("label", { for: "distance" },
    "Their distance in mm (10 s at 25 mm/s are 250, a mark of 1 mV at 10 mm/mV is 10): "), input,
  html("button", { type: "submit" }, "Read the page"));
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    try {
      await api.change(state.number, "scale", { points, mm: input.value });
    } catch (error) {
      return say(error.message);
    }
    tool.stop();
    Object.assign(state, { number: null, ecg: null });
    warn("");
    return poll();
  });
  warn(form);
  input.focus();
  return "";
}

// What lies between the legs of the calipers, on the scale of the panel under the first.
function measured(panel, [[x0, y0], [x1, y1]]) {
  const ms = Math.abs(x1 - x0) / panel.speed_mm_s * 1000, mv = (y0 - y1) / panel.gain_mm_mv;
  const rate = ms ? `, ${(60000 / ms).toFixed(0)}/min` : "";
  const words = `${ms.toFixed(0)} ms, ${mv.toFixed(2)} mV${rate}`;
  tool.draw(words);
  return `Calipers in ${panel.lead}: ${words}`;
}

function take(name) {
  if (name && (!state.ecg?.paper || paper.view !== "flat")) {
    return say("Tools work on the flattened paper alone: press v.");
  }
  const next = name === tool.name ? null : name;
  tool.stop();
  if (next) tool.start(next);
  byId("paper").classList.toggle("tool", Boolean(next));
  for (const button of document.querySelectorAll("#tools [data-tool]")) {
    button.setAttribute("aria-pressed", String(button.dataset.tool === next));
  }
  if (next) byId("paper").focus();
  return say(next ? TOOLS[next].say : "");
}

function turned() {
  take(null);
  const view = paper.turn();
  redraw();
  say(view === "flat" ? "The paper flattened." : "As scanned, without the trace.");
}

function blink() {
  if (state.blinking) {
    clearInterval(state.blinking);
    state.blinking = null;
    return paper.blink(true);
  }
  let visible = true;
  state.blinking = setInterval(() => paper.blink(visible = !visible), BLINK_MS);
  return undefined;
}

function doubt(number) {
  const { doubts } = state.ecg;
  if (!doubts.length) return say("No self-check failed.");
  state.doubt = number % doubts.length;
  const { message, panels } = doubts[state.doubt];
  if (panels.length && paper.view === "flat") paper.seek(panels[0]);
  redraw();
  return say(`Doubt ${state.doubt + 1} of ${doubts.length}: ${message}`);
}

function select(panel, seek = false) {
  state.panel = panel;
  if (seek && paper.view === "flat" && state.ecg.paper) paper.seek(panel);
  redraw();
}

function evidence(places) {
  beat.evidence(places);
  if (!state.ecg.paper || paper.view !== "flat") return;
  const { at_s, edges } = state.ecg.beat;
  paper.evidence(places.flatMap(({ lead, time_ms }) => at_s.map((s) => (
    { lead, time_s: s + (edges.qrs_on_ms + (time_ms ?? 0)) / 1000 }))));
}

const say = (words) => { if (words !== null && words !== undefined) byId("said").textContent = words; };

function warn(words, button) {
  byId("banner").hidden = !words;
  byId("banner").replaceChildren(words, ...(button ? [button] : []));
}

const correct = (correction) => change("correct", { correction, who: byId("who").value });

let queue = Promise.resolve();
function change(what, wish = {}) {
  queue = queue.then(() => changed(what, wish)); // one after the other: each knows its revision
  return queue;
}

async function changed(what, wish) {
  say("Computing …");
  try {
    show(await api.change(state.number, what, { ...wish, revision: state.ecg.revision }));
    say("Done.");
  } catch (error) {
    say(error.message);
    if (error.status === 409) elsewhere(error.message);
    else if (!error.status) warn(error.message);
    show(state.ecg);
  }
}

function elsewhere(words) {
  const over = html("button", { type: "button", onclick: () => open(state.number, true) },
    "Take the pen over");
  warn(words, over);
}

function redraw() {
  const { ecg } = state;
  const doubted = ecg.doubts[state.doubt]?.panels ?? [];
  if (ecg.paper) paper.show(ecg, state.panel, doubted);
  showPanel(ecg, state.panel, correct);
}

function show(ecg) {
  state.ecg = ecg;
  redraw();
  beat.show(ecg);
  showSide(state.number, ecg, { doubt, evidence, correct });
  byId("undo").disabled = !ecg.corrections.length;
  byId("redo").disabled = !ecg.can_redo;
  const signed = ecg.signed ? `Signed by ${ecg.signed.name}` : "NOT SIGNED";
  byId("state").replaceChildren(html("b", {}, signed), ` · ${ecg.headline.join(" ")}`);
  document.title = `${ecg.name} · over-read`;
}

async function open(number, take = false) {
  if (state.number !== null && state.number !== number) api.release(state.number);
  state.number = number;
  const ecg = await api.open(number, take);
  Object.assign(state, { panel: null, doubt: -1 });
  if (ecg.unscaled) return unscaled(number, ecg);
  byId("paper").toggleAttribute("hidden", !ecg.paper);
  byId("tools").toggleAttribute("hidden", !ecg.paper);
  if (ecg.paper) paper.open(number, ecg);
  show(ecg);
  warn("");
  if (ecg.pen) return;
  elsewhere("This ECG is open in another tab. You can look; to change it, take the pen over.");
}

const usable = (how) => how === "ready" || how === "no scale";

// The worklist is asked again until everything is read.
async function poll() {
  let list;
  try {
    list = await api.worklist();
  } catch (error) {
    return warn(error.message);
  }
  const chosen = state.number ?? 0;
  byId("worklist").replaceChildren(...list.map(({ name, state: how, stage, message }, k) =>
    html("option", { value: k, selected: k === chosen, disabled: !usable(how) },
      how === "ready" ? name : `${name}: ${message || stage || how}`)));
  const busy = list.some(({ state: how }) => how === "waiting" || how === "reading");
  if (state.number === null) {
    const first = list.findIndex(({ state: how }) => usable(how));
    if (first >= 0) await open(first);
    else byId("state").textContent = list.map((e) => `${e.name}: ${e.message || e.stage || e.state}`).join(" · ");
  }
  if (busy) setTimeout(poll, POLL_MS);
  return undefined;
}

function keyed(event) {
  const typing = event.target.closest("input, textarea, select, dialog, [role=slider]");
  if (!state.ecg || typing || event.ctrlKey || event.metaKey || event.altKey) return;
  const [x, y] = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1],
  }[event.key] ?? [0, 0];
  const onPaper = event.target === byId("paper") || event.target === document.body;
  if (onPaper && (x || y)) {
    const step = event.shiftKey ? FINE_MM : COARSE_MM;
    if (tool.name) tool.step(x * step, y * step);
    else paper.pan(x * PAN, y * PAN);
  } else if (event.key === "Escape") take(null);
  else if (onPaper && tool.name && event.key === " ") say(tool.put());
  else if (onPaper && tool.name === "redraw" && event.key === "Enter") say(tool.finish());
  else {
    const action = ACTIONS.find(([key]) => key === event.key);
    if (!action) return;
    action[2]();
  }
  event.preventDefault();
}

function toolbar() {
  const buttons = ACTIONS.filter(([key]) => !"zZm?".includes(key)).map(([key, label, act]) => {
    const name = Object.keys(TOOLS).find((tool) => TOOLS[tool].key === key);
    return html("button", { type: "button", onclick: act, title: `Key ${key}`, "data-tool": name,
      "aria-pressed": name ? "false" : null }, label);
  });
  const strength = html("input", { type: "range", min: 0, max: 1, step: 0.05, value: 0.9,
    oninput: (event) => paper.strength(event.target.value) });
  byId("tools").replaceChildren(...buttons, html("label", {}, "Trace ", strength));
}

toolbar();
byId("keylist").replaceChildren(...[...ACTIONS, ...ALSO].flatMap(([key, label]) =>
  [html("dt", {}, key), html("dd", {}, label)]));
byId("undo").addEventListener("click", () => change("undo"));
byId("redo").addEventListener("click", () => change("redo"));
byId("help").addEventListener("click", () => byId("keys").showModal());
byId("worklist").addEventListener("change", (event) => open(Number(event.target.value)));
byId("sign").addEventListener("submit", (event) => {
  event.preventDefault();
  change("sign", { name: byId("who").value, comment: byId("comment").value });
});
document.addEventListener("keydown", keyed);
window.addEventListener("pagehide", () => { if (state.number !== null) api.release(state.number); });
poll();
