// The page: one ECG of the worklist, its paper, its beat, its reading.

import * as api from "./api.js";
import { Beat, inEachLead } from "./beat.js";
import { Beside } from "./beside.js";
import { byId, html } from "./draw.js";
import { useKeys } from "./keys.js";
import { showPanel } from "./panel.js";
import { Paper } from "./paper.js";
import { showSide } from "./side.js";
import { TOOLS, Tool, panelAt, sides } from "./tools.js";
import { askDistance, askScale, showUnread, unreadEcg } from "./unread.js";

const POLL_MS = 700, SOON_MS = 150, BLINK_MS = 450;
const state = { number: null, ecg: null, list: [], panel: null, doubt: -1, blinking: null };

const paper = new Paper(byId("paper"), byId("ground"), {
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
const beside = new Beside((found) => {
  beat.beside(found);
  byId("beatnote").textContent = found
    ? `full line: this ECG; broken line: ${found.name}; aligned on the QRS onset` : "";
});

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

// A tool has all its places.
function used(name, panel, points) {
  if (name === "caliper") return measured(panel, points);
  if (name === "scale") {
    askDistance(state.number, points, { warn, say, read: () => {
      tool.stop();
      byId("paper").classList.remove("tool");
      return open(state.number);
    } });
    return "";
  }
  const xs = points.map(([x]) => x);
  const span = { left_mm: Math.min(...xs), right_mm: Math.max(...xs) };
  correct({
    strike: { kind: "strike out", panel: panel?.number, ...span },
    redraw: { kind: "redraw", panel: panel?.number, points },
    ignore: { kind: "ignore", ...sides(points) },
    crop: { kind: "crop", ...sides(points) },
  }[name]);
  take(null);
  return null;
}

// What lies between the legs of the calipers, on the scale of the panel under the first.
function measured(panel, [[x0, y0], [x1, y1]]) {
  const ms = Math.abs(x1 - x0) / panel.speed_mm_s * 1000, mv = (y0 - y1) / panel.gain_mm_mv;
  const rate = ms ? `, ${(60000 / ms).toFixed(0)}/min` : "";
  const words = `${ms.toFixed(0)} ms, ${mv.toFixed(2)} mV${rate}`;
  tool.draw(words);
  return `Calipers in ${panel.lead}: ${words}`;
}

function keep() {
  const panel = tool.points.length === 2 && panelAt(state.ecg.panels, ...tool.points[0]);
  if (tool.name !== "caliper" || !panel) return say("Set both legs of the calipers first.");
  return correct({ kind: "measured", panel: panel.number, points: tool.points });
}

function snap() {
  tool.snap = !tool.snap;
  say(tool.snap ? "The calipers snap to the trace." : "The calipers stand where they are set.");
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

function turnView() {
  if (!state.ecg.paper?.flat || !state.ecg.paper.scan) return;
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
  const { message, panels, field } = doubts[state.doubt];
  if (panels.length && paper.view === "flat") paper.seek(panels[0]);
  redraw();
  byId(field)?.scrollIntoView({ block: "nearest" });
  return say(`Doubt ${state.doubt + 1} of ${doubts.length}: ${message}`);
}

function select(panel, seek = false) {
  state.panel = panel;
  if (seek && state.ecg.panels[panel]?.y_mm && paper.view === "flat") paper.seek(panel);
  redraw();
}

function evidence(seen) {
  const places = inEachLead(seen, state.ecg.beat);
  beat.evidence(places);
  if (!state.ecg.paper || paper.view !== "flat") return;
  const { at_s, edges } = state.ecg.beat;
  paper.evidence(places.flatMap(({ lead, time_ms }) => at_s.map((s) => (
    { lead, time_s: s + (edges.qrs_on_ms + (time_ms ?? 0)) / 1000 }))));
}

function say(words) {
  if (words !== null && words !== undefined) byId("said").textContent = words;
}

function warn(words, button) {
  byId("banner").hidden = !words;
  byId("banner").replaceChildren(words, ...(button ? [button] : []));
}

export const correct = (correction) => change("correct", { correction, who: byId("who").value });

let queue = Promise.resolve();
function change(what, wish = {}) {
  if (state.ecg?.revision === undefined) return undefined; // not read yet
  queue = queue.then(() => changed(what, wish)); // one after the other: each knows its revision
  return queue;
}

async function changed(what, wish) {
  say("Computing …");
  try {
    show(await api.change(state.number, what, { ...wish, revision: state.ecg.revision }));
    say("Done.");
    beside.refresh();
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
  showSide(state.number, ecg, { doubt, evidence, correct, say, beat: useBeat });
  byId("undo").disabled = !ecg.corrections.length;
  byId("redo").disabled = !ecg.can_redo;
  const signed = ecg.signed ? `Signed by ${ecg.signed.name}` : "NOT SIGNED";
  byId("state").replaceChildren(html("b", {}, signed), ` · ${ecg.headline.join(" ")}`);
  document.title = `${ecg.name} · over-read`;
}

async function open(number, over = false) {
  if (state.number !== null && state.number !== number) api.release(state.number);
  state.number = number;
  const ecg = await api.open(number, over);
  if (state.number !== number) return; // another was chosen meanwhile
  if (ecg.unread) {
    unread(number, ecg);
    return;
  }
  Object.assign(state, { panel: null, doubt: -1, page: null });
  document.body.classList.remove("unread");
  byId("tools").hidden = byId("sheet").hidden = !ecg.paper;
  if (ecg.paper) paper.open(number, ecg);
  show(ecg);
  warn("");
  poll();
  if (!ecg.pen) {
    elsewhere("This ECG is open in another tab. You can look; to change it, take the pen over.");
  }
}

// The page is shown as scanned while it is read.
function unread(number, ecg) {
  const page = `${number} ${ecg.size_px}`;
  if (!state.ecg || state.page !== page) {
    Object.assign(state, { ecg: unreadEcg(ecg), page });
    document.body.classList.add("unread");
    byId("tools").hidden = byId("undo").disabled = byId("redo").disabled = true;
    byId("sheet").hidden = !ecg.size_px;
    if (ecg.size_px) paper.open(number, state.ecg);
  }
  showUnread(ecg);
  listed();
  if (ecg.unread === "no scale") askScale(tool, say);
  else if (ecg.unread === "waiting" || ecg.unread === "reading") {
    setTimeout(() => state.number === number && open(number).catch((e) => warn(e.message)),
      ecg.size_px ? POLL_MS : SOON_MS);
  }
}

function listed() {
  byId("worklist").replaceChildren(...state.list.map(({ number, name, state: how, message }) =>
    html("option", { value: number, selected: number === state.number },
      ["ready", "waiting", "to compare"].includes(how) ? name : `${name}: ${message || how}`)));
  beside.offer(state.number, state.list);
}

function go(by) {
  const at = state.list.findIndex(({ number }) => number === state.number);
  const next = state.list[at + by];
  if (!next) return say(by > 0 ? "This is the last ECG." : "This is the first ECG.");
  return open(next.number);
}

// The worklist is asked again as long as something in it is being read.
async function poll() {
  clearTimeout(state.polling);
  try {
    state.list = await api.worklist();
    if (state.number === null) await open(state.list[0].number);
    else listed();
  } catch (error) {
    return warn(error.message);
  }
  if (state.list.some(({ state: how }) => how === "reading")) state.polling = setTimeout(poll, POLL_MS);
  return undefined;
}

const undo = () => change("undo"), redo = () => change("redo");
useKeys({ turnView, blink, take, keep, snap, undo, redo, go, say,
  nextDoubt: () => doubt(state.doubt + 1),
  nextPanel: () => select(((state.panel ?? -1) + 1) % Math.max(state.ecg.panels.length, 1), true),
}, paper, tool);
byId("undo").addEventListener("click", undo);
byId("redo").addEventListener("click", redo);
byId("help").addEventListener("click", () => byId("keys").showModal());
byId("worklist").addEventListener("change", (event) => open(Number(event.target.value)));
byId("sign").addEventListener("submit", (event) => {
  event.preventDefault();
  change("sign", { name: byId("who").value, comment: byId("comment").value });
});
window.addEventListener("pagehide", () => { if (state.number !== null) api.release(state.number); });
poll();
