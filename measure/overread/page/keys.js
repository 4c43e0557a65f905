// What the keys do, the toolbar of the same actions, and the list of keys.

import { byId, html } from "./draw.js";
import { TOOLS } from "./tools.js";

const PAN = 0.12, FINE_MM = 0.2, COARSE_MM = 1;
const ALSO = [["arrows", "Move the paper; in a tool, its cross (Shift: finely)"],
  ["space", "Set a point of the tool"], ["Enter", "Finish the redrawn stretch"],
  ["Escape", "Put the tool away"], ["left, right on a boundary", "2 ms (Shift: 10 ms)"]];

// `does` holds what each action calls; see main.js.
export function useKeys(does, paper, tool) {
  const actions = [
    ["f", "Fit", () => paper.fit()],
    ["v", "Scanned", does.turnView],
    ["b", "Blink", does.blink],
    ["n", "Next doubt", does.nextDoubt],
    ["p", "Next panel", does.nextPanel],
    ["+", "Closer", () => paper.zoom(0.8)],
    ["-", "Farther", () => paper.zoom(1.25)],
    ...Object.entries(TOOLS).filter(([, { key }]) => key).map(([name, { key, label }]) =>
      [key, label, () => does.take(name), name]),
  ];
  const more = [
    ["m", "March the calipers", () => tool.march()],
    ["k", "Keep what the calipers measured", does.keep],
    ["t", "Calipers snap to the trace, or no longer", does.snap],
    ["z", "Undo", does.undo],
    ["Z", "Redo", does.redo],
    ["g", "Go to signing", () => byId("comment").focus()],
    ["o", "Old beside new", () => byId("other").focus()],
    ["[", "ECG before", () => does.go(-1)],
    ["]", "Next ECG", () => does.go(1)],
    ["?", "Keys", () => byId("keys").showModal()],
  ];
  toolbar(actions, paper);
  byId("keylist").replaceChildren(...[...actions, ...more, ...ALSO].flatMap(([key, label]) =>
    [html("dt", {}, key), html("dd", {}, label)]));
  document.addEventListener("keydown", (event) => {
    const typing = event.target.closest("input, textarea, select, dialog, [role=slider]");
    if (typing || event.ctrlKey || event.metaKey || event.altKey) return;
    const onPaper = event.target === byId("paper") || event.target === document.body;
    if (onPaper ? onThePaper(event, does, paper, tool) : event.key === "Escape" && put(does)) {
      event.preventDefault();
      return;
    }
    const action = [...actions, ...more].find(([key]) => key === event.key);
    if (!action) return;
    action[2]();
    event.preventDefault();
  });
}

const put = (does) => does.take(null) ?? true;

// Whether the paper, or the tool on it, took this key.
function onThePaper(event, does, paper, tool) {
  const [x, y] = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1],
  }[event.key] ?? [0, 0];
  if (x || y) {
    const step = event.shiftKey ? FINE_MM : COARSE_MM;
    if (tool.name) tool.step(x * step, y * step);
    else paper.pan(x * PAN, y * PAN);
  } else if (event.key === "Escape") does.take(null);
  else if (tool.name && event.key === " ") does.say(tool.put());
  else if (tool.name === "redraw" && event.key === "Enter") does.say(tool.finish());
  else return false;
  return true;
}

function toolbar(actions, paper) {
  const buttons = actions.map(([key, label, act, name]) => html("button", { type: "button",
    onclick: act, title: `Key ${key}`, "data-tool": name, "aria-keyshortcuts": key,
    "aria-pressed": name ? "false" : null }, label));
  const strength = html("input", { type: "range", min: 0, max: 1, step: 0.05, value: 0.9,
    oninput: (event) => paper.strength(event.target.value) });
  byId("tools").replaceChildren(...buttons, html("label", {}, "Trace ", strength));
}
