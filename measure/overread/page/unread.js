// An ECG that is not read yet: its page is there to be looked at, and where no grid is found, to
// show its scale on.

import * as api from "./api.js";
import { byId, html } from "./draw.js";
import { TOOLS } from "./tools.js";

const WORDS = { waiting: "Waiting to be read", reading: "Reading the page", failed: "Cannot be read",
  "to compare": "A saved reading: it can be held beside another ECG" };

export const unreadEcg = ({ size_px: px }) => ({ panels: [], beats: [], doubts: [], corrections: [],
  paper: px ? { scan: { px } } : null });

export function showUnread({ unread, stage, message, name }) {
  const how = [WORDS[unread] ?? "", stage && `(${stage})`, message].filter(Boolean).join(" ");
  byId("state").textContent = unread === "no scale" ? `${message}. Or show the scale here.`
    : `${name}: ${how}${unread === "reading" || unread === "waiting" ? " …" : ""}`;
}

export function askScale(tool, say) {
  tool.start("scale");
  byId("paper").classList.add("tool");
  byId("paper").focus();
  say(TOOLS.scale.say);
}

// How far apart the two places are; `read` is called once the page is sent to be read with it.
export function askDistance(number, points, { warn, say, read }) {
  const input = html("input", { id: "distance", inputmode: "decimal", size: 6 });
  const form = html("form", {}, html("label", { for: "distance" },
    "Their distance in mm (10 s at 25 mm/s are 250, a mark of 1 mV at 10 mm/mV is 10): "), input,
  html("button", { type: "submit" }, "Read the page"));
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    try {
      await api.change(number, "scale", { points, mm: input.value });
    } catch (error) {
      return say(error.message);
    }
    warn("");
    return read();
  });
  warn(form);
  input.focus();
}
