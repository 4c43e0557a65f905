// The column beside the paper: doubts, intervals, findings, corrections, signatures.

import { file } from "./api.js";
import { byId, html } from "./draw.js";

const SIGNS = { met: "■", undecided: "◪", "not met": "□" };
const FILES = { report: "Report (HTML)", reading: "Reading (JSON)", tracing: "Tracing (JSON)",
  samples: "Samples (CSV)" };

export function showSide(number, ecg, on) {
  byId("notice").textContent = ecg.notice;
  byId("doubts").replaceChildren(...doubts(ecg, on));
  byId("intervals").replaceChildren(...ecg.intervals.map(interval));
  showFindings(ecg, on);
  byId("scale").replaceChildren(...scale(ecg, on));
  byId("corrections").replaceChildren(...corrections(ecg));
  byId("signatures").replaceChildren(...ecg.signatures.map((s) =>
    html("li", {}, `${s.name}, ${s.when}${s.comment ? `: ${s.comment}` : ""}`)));
  byId("exports").replaceChildren(...Object.entries(FILES)
    .filter(([kind]) => ecg.paper || kind === "report" || kind === "reading")
    .map(([kind, label]) => html("li", {}, html("a", { href: file(number, kind) }, label))));
}

export function showPanel(ecg, number, on) {
  const part = byId("panelpart"), panel = ecg.panels[number];
  part.hidden = !panel?.y_mm;
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

function doubts(ecg, on) {
  if (!ecg.doubts.length) return [html("li", {}, "No self-check failed. Look at the trace all the same.")];
  return ecg.doubts.map((doubt, k) => html("li", { class: doubt.failed ? "failed" : null },
    html("button", { type: "button", onclick: () => on.doubt(k) }, doubt.message)));
}

function interval(row) {
  const off = row.place !== "" && row.place !== "within";
  const value = html("td", { class: off ? "off" : null }, row.now);
  if (row.automatic) value.append(html("span", { class: "was" }, `automatic: ${row.automatic}`));
  const range = off ? `${row.place} (${row.usual})` : row.usual;
  return html("tr", { "data-key": row.key },
    html("td", {}, row.label), value, html("td", {}, range));
}

function showFindings(ecg, on) {
  const open = new Set([...document.querySelectorAll("#findings details[open]")]
    .map((d) => d.dataset.key));
  byId("findings").replaceChildren(...ecg.findings.flatMap(({ family, findings }) => [
    html("h3", {}, family), ...findings.map((f) => finding(f, open.has(f.key), on))]));
}

function finding(found, open, on) {
  const words = `${SIGNS[found.result]} ${found.result}: ${found.definition}`;
  const was = found.automatic ? html("span", { class: "was" }, `automatic: ${found.automatic}`) : null;
  return html("details", { "data-key": found.key, open },
    html("summary", { class: found.result === "met" ? "met" : null }, words, was),
    html("p", { class: "source" }, found.source),
    ...found.clauses.map((clause) => clauseOf(clause, on)),
    ...found.cautions.map((caution) => html("p", { class: "source" }, caution)));
}

function clauseOf(clause, on) {
  const look = () => on.evidence(clause.places);
  return html("div", { class: "clause", tabindex: 0, onpointerenter: look, onfocus: look,
    onpointerleave: () => on.evidence([]), onblur: () => on.evidence([]) },
  `${SIGNS[clause.result]} ${clause.text}`, ...clause.lines.map((line) => html("div", {}, line)));
}

function scale(ecg, on) {
  const { speed_mm_s: speed, gain_mm_mv: gain, timing, layout } = ecg.scale;
  const person = (change) => on.correct({ kind: "patient", ...ecg.person, ...change });
  const patient = [
    ...choice("Sex", "sex", { "": "not given", female: "female", male: "male" },
      ecg.person.sex ?? "", (value) => person({ sex: value || null })),
    ...field("Age, years", "age", ecg.person.age_years ?? "", (value) =>
      person({ age_years: value === "" ? null : Number(value) })),
  ];
  if (!ecg.paper) return patient;
  const from = (known) => ` (${known.source})`;
  return [
    ...field(`Speed, mm/s${from(speed)}`, "speed", speed.value, (value) =>
      on.correct({ kind: "speed", mm_s: Number(value) })),
    ...field(`Gain, mm/mV${from(gain)}`, "allgain", gain.value, (value) =>
      on.correct({ kind: "gain", mm_mv: Number(value) })),
    ...choice(`Columns${from(timing)}`, "timing", { consecutive: "one after the other",
      simultaneous: "all at the same instant" }, timing.value, (value) =>
      on.correct({ kind: "timing", timing: value })),
    html("span", {}, "Layout"), html("span", {}, `${layout.value}${from(layout)}`),
    ...patient,
  ];
}

function corrections(ecg) {
  if (!ecg.corrections.length) return [html("li", {}, "None.")];
  return ecg.corrections.map(({ kind, who, when, ...rest }) => {
    const panel = ecg.panels[rest.panel]?.lead;
    const what = Object.entries(rest).filter(([key]) => key !== "panel" && key !== "points")
      .map(([key, value]) => `${key.replace(/_(mm|ms|s)$/, "").replaceAll("_", " ")} ${
        typeof value === "number" ? Number(value.toFixed(2)) : value}`).join(", ");
    return html("li", {}, [kind, panel && `in ${panel}`, what].filter(Boolean).join(" · "),
      html("span", { class: "was" }, `${who || "no name given"}, ${when}`));
  });
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
