// The traced line of a panel: in full where the paper is close, with fewer points where it is far.

import { pathOf, svg } from "./draw.js";

export const CLOSE_PX_PER_MM = 8; // from here on every sample is drawn
const ASTRAY_MM = 0.06; // so far a line of fewer points may pass by a sample: half a pixel there
const SHORTEST_GAP = 10; // samples of a gap that is worth hatching

// The elements of a panel's trace; those of class `trace` have their two forms as `full`, `far`.
export function traceOf(panel, close) {
  if (!panel.y_mm) return [];
  const x = (k) => panel.box_mm[0] + k * panel.step_mm;
  const doubtful = new Set(panel.doubtful);
  const line = (name, ys) => {
    const path = svg("path", { class: name });
    path.forms = { full: pathOf(x, ys), far: farther(x, ys) };
    path.setAttribute("d", close ? path.forms.full : path.forms.far);
    return path;
  };
  const parts = [line("trace", panel.y_mm.map((y, k) => (doubtful.has(k) ? null : y)))];
  if (doubtful.size) {
    parts.push(line("trace doubtful", panel.y_mm.map((y, k) => (doubtful.has(k) ? y : null))));
  }
  return [...parts, ...gaps(panel, x)];
}

function gaps(panel, x) {
  const parts = [];
  let first = null;
  for (let k = 0; k <= panel.y_mm.length; k += 1) {
    const missing = k < panel.y_mm.length && panel.y_mm[k] === null;
    if (missing) first ??= k;
    else if (first !== null) {
      if (k - first >= SHORTEST_GAP) {
        parts.push(svg("rect", { class: "missing", x: x(first), y: panel.baseline_mm - 2.5,
          width: (k - first) * panel.step_mm, height: 5 }));
      }
      first = null;
    }
  }
  return parts;
}

// A path that leaves points out as long as no sample lies farther than ASTRAY_MM above or below it:
// from the last point kept, each sample narrows the slopes that are allowed.
function farther(x, ys) {
  let path = "", last = null, low = -Infinity, high = Infinity;
  const put = (k, letter) => {
    path += `${letter}${x(k).toFixed(2)} ${ys[k].toFixed(2)}`;
    last = k;
    [low, high] = [-Infinity, Infinity];
  };
  for (let k = 0; k < ys.length; k += 1) {
    if (ys[k] === null) {
      if (last !== null && last !== k - 1) put(k - 1, "L");
      last = null;
      continue;
    }
    if (last === null) { put(k, "M"); continue; }
    let slope = (ys[k] - ys[last]) / (x(k) - x(last));
    if (slope < low || slope > high) {
      put(k - 1, "L");
      slope = (ys[k] - ys[last]) / (x(k) - x(last));
    }
    const reach = ASTRAY_MM / (x(k) - x(last));
    low = Math.max(low, slope - reach);
    high = Math.min(high, slope + reach);
  }
  if (last !== null && last !== ys.length - 1) put(ys.length - 1, "L");
  return path;
}
