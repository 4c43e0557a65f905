// The column beside the paper: doubts, intervals, findings, corrections, signatures.

import { file, take } from "./api.js";
import { byId, html } from "./draw.js";
import { showScale } from "./panel.js";

const SIGNS = { met: "■", undecided: "◪", "not met": "□" };
const FILES = { report: "Report (HTML)", reading: "Reading (JSON)", tracing: "Tracing (JSON)",
  samples: "Samples (CSV)", overlay: "Overlay (PNG)", wfdb: "WFDB (zip)", edf: "EDF+",
  dicom: "DICOM waveform", fhir: "FHIR observation", aecg: "aECG (HL7)", pdf: "Report (PDF)",
  "dicom-pdf": "Report (PDF in DICOM)", "dicom-scan": "The scan itself (DICOM)" };
const OF_PAGES = ["overlay", "dicom-scan"];

export function showSide(number, ecg, on) {
  byId("notice").textContent = ecg.notice;
  byId("doubts").replaceChildren(...doubts(ecg, on));
  byId("intervals").replaceChildren(...ecg.intervals.map(interval));
  showFindings(ecg, on);
  byId("beats").replaceChildren(...ecg.beats.map((beat) => beatOf(beat, on)));
  byId("measured").replaceChildren(...measured(ecg));
  showScale(ecg, on.correct);
  byId("corrections").replaceChildren(...corrections(ecg));
  byId("signatures").replaceChildren(...ecg.signatures.map((s) =>
    html("li", {}, `${s.name}, ${s.when}${s.comment ? `: ${s.comment}` : ""}`)));
  byId("exports").replaceChildren(...Object.entries(FILES)
    .filter(([kind]) => !OF_PAGES.includes(kind) || ecg.paper?.scan)
    .map(([kind, label]) => html("li", {}, html("a", { href: file(number, kind),
      onclick: (event) => {
        event.preventDefault();
        take(file(number, kind)).catch((error) => on.say(error.message));
      } }, label))));
}

function beatOf(beat, on) {
  const words = `${beat.time_s.toFixed(2)} s, ${beat.kind}`;
  return html("button", { type: "button", "aria-pressed": String(beat.averaged),
    "data-at": beat.time_s, onclick: () => on.beat(beat.time_s) }, words);
}

function measured(ecg) {
  if (!ecg.measured.length) return [html("li", {}, "None.")];
  return ecg.measured.map(({ lead, ms, mv, rate_bpm: rate }) => html("li", {},
    `${lead}: ${ms.toFixed(0)} ms, ${mv.toFixed(2)} mV${rate ? `, ${rate.toFixed(0)}/min` : ""}`));
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
  return html("div", { class: "clause", role: "note", tabindex: 0, onpointerenter: look, onfocus: look,
    onpointerleave: () => on.evidence([]), onblur: () => on.evidence([]) },
  `${SIGNS[clause.result]} ${clause.text}`, ...clause.lines.map((line) => html("div", {}, line)));
}

function corrections(ecg) {
  if (!ecg.corrections.length) return [html("li", {}, "None.")];
  return ecg.corrections.map(({ kind, who, when, void: without, ...rest }) => {
    const panel = ecg.panels[rest.panel]?.lead;
    const what = Object.entries(rest).filter(([key, value]) => key !== "panel" && key !== "points" && value !== null)
      .map(([key, value]) => `${key.replace(/_(mm|ms|s)$/, "").replaceAll("_", " ")} ${
        typeof value === "number" ? Number(value.toFixed(2)) : value}`).join(", ");
    const lost = without && "void: the page was arranged, or its speed changed, after it";
    return html("li", {}, [kind, panel && `in ${panel}`, what, lost].filter(Boolean).join(" · "),
      html("span", { class: "was" }, `${who || "no name given"}, ${when}`));
  });
}
