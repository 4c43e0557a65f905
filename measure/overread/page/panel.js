// The panel that is chosen, the scale of the page, its arrangement, the patient: what is typed.

import { byId, html } from "./draw.js";

const LAYOUTS = ["3x4", "3x4+1", "3x4+3", "6x2", "6x2+1", "12x1", "4x3", "4x3+1", "6x1", "3x1", "1x1"];

export function showPanel(ecg, number, on) {
  const part = byId("panelpart"), panel = ecg.panels[number];
  part.hidden = !panel?.y_mm || !ecg.paper.scan;
  if (part.hidden) return;
  byId("panelname").textContent = `Panel ${number + 1}: ${panel.lead}${panel.strip ? " strip" : ""}`;
  const [left, , right] = panel.box_mm;
  const others = ecg.panels.filter((p) => p.number !== number)
    .map((p) => html("option", { value: p.number }, `${p.lead}${p.strip ? " strip" : ""}`));
  byId("panel").replaceChildren(
    ...field("Lead", "lead", panel.lead, (value) =>
      on({ kind: "lead name", panel: number, lead: value.trim() })),
    ...labelled("Swap with", html("select", { id: "swap",
      onchange: (event) => on({ kind: "swap", panel: number, other: Number(event.target.value) }) },
    html("option", { value: "" }, "…"), ...others)),
    ...field("Gain, mm/mV", "gain", panel.gain_mm_mv, (value) =>
      on({ kind: "gain", mm_mv: Number(value), panel: number })),
    ...field("Left edge, mm", "edgeleft", left.toFixed(1), (value) =>
      on({ kind: "panel edges", panel: number, left_mm: Number(value), right_mm: right })),
    ...field("Right edge, mm", "edgeright", right.toFixed(1), (value) =>
      on({ kind: "panel edges", panel: number, left_mm: left, right_mm: Number(value) })),
    html("button", { type: "button", onclick: () => on({ kind: "flip", panel: number }) },
      "Flip: it is printed upside down"),
    ...panel.notes.map((note) => html("p", { class: "notice" }, note)),
  );
}

export function showScale(ecg, on) {
  byId("scale").replaceChildren(...(ecg.paper?.scan ? page(ecg, on) : []), ...patient(ecg, on));
}

function page(ecg, on) {
  const { speed_mm_s: speed, gain_mm_mv: gain, timing, layout } = ecg.scale;
  const from = (known) => ` (${known.source})`;
  const names = () => byId("order").value.split(/[\s,;]+/).filter(Boolean);
  return [
    ...field(`Speed, mm/s${from(speed)}`, "speed", speed.value, (value) =>
      on({ kind: "speed", mm_s: Number(value) })),
    ...field(`Gain, mm/mV${from(gain)}`, "allgain", gain.value, (value) =>
      on({ kind: "gain", mm_mv: Number(value) })),
    ...choice(`Columns${from(timing)}`, "timing", { consecutive: "one after the other",
      simultaneous: "all at the same instant" }, timing.value, (value) =>
      on({ kind: "timing", timing: value })),
    ...choice("Turn to upright, clockwise", "turn", { 0: "as it is", 90: "90°", 180: "180°", 270: "270°" },
      String(ecg.paper.turn_deg), (value) => on({ kind: "turn", turn_deg: Number(value) })),
    ...labelled(`Layout${from(layout)}`, html("input", { id: "layout", value: layout.value, size: 8,
      list: "layouts", autocomplete: "off" })),
    html("datalist", { id: "layouts" }, ...LAYOUTS.map((value) => html("option", { value }))),
    ...labelled("Leads, row by row", html("input", { id: "order", size: 8, autocomplete: "off",
      placeholder: "as usual" })),
    html("button", { type: "button", onclick: () => on({ kind: "arrangement",
      layout: byId("layout").value.trim(), lead_order: names().length ? names() : null }) },
    "Read the page in this layout"),
  ];
}

function patient(ecg, on) {
  const person = (change) => on({ kind: "patient", ...ecg.person, ...change });
  return [
    ...choice("Sex", "sex", { "": "not given", female: "female", male: "male" },
      ecg.person.sex ?? "", (value) => person({ sex: value || null })),
    ...field("Age, years", "age", ecg.person.age_years ?? "", (value) =>
      person({ age_years: value === "" ? null : Number(value) })),
  ];
}

const labelled = (label, input) => [html("label", { for: input.id }, label), input];

const field = (label, id, value, changed) => labelled(label, html("input", { id, value,
  size: 8, autocomplete: "off", onchange: (event) => changed(event.target.value) }));

function choice(label, id, options, chosen, changed) {
  const choices = Object.entries(options).map(([value, words]) =>
    html("option", { value, selected: value === chosen }, words));
  return labelled(label, html("select", { id, onchange: (event) => changed(event.target.value) },
    ...choices));
}
