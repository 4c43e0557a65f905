// Old beside new: an earlier ECG chosen from the worklist, what changed, and its beat for the
// drawing of the beats.

import * as api from "./api.js";
import { byId, html } from "./draw.js";

const POLL_MS = 700;

export class Beside {
  constructor(shown) {
    this.shown = shown; // (beat of the old ECG, or null)
    this.other = null;
    byId("other").addEventListener("change", (event) => {
      this.other = event.target.value === "" ? null : Number(event.target.value);
      this.refresh();
    });
  }

  // The ECGs that can be chosen beside number `number`.
  offer(number, list) {
    if (number !== this.number) {
      Object.assign(this, { number, other: null });
      this.#show(null);
    }
    const options = list.filter((e) => e.number !== number && e.state !== "failed"
      && e.state !== "no scale");
    byId("besidepart").hidden = !options.length;
    byId("other").replaceChildren(html("option", { value: "" }, "none"),
      ...options.map(({ number: k, name }) =>
        html("option", { value: k, selected: k === this.other }, name)));
  }

  // Asked again after every change of the new one; an answer that is out of date is dropped.
  async refresh() {
    const asked = [this.number, this.other];
    const current = () => asked[0] === this.number && asked[1] === this.other;
    if (this.other === null) return this.#show(null);
    let answer;
    try {
      answer = await api.beside(...asked);
    } catch (error) {
      return byId("besideall").replaceChildren(html("p", {}, error.message));
    }
    if (!current()) return undefined;
    if (!answer.unread) return this.#show(answer);
    byId("besideall").replaceChildren(
      html("p", {}, answer.message || `Reading it … ${answer.stage ?? ""}`));
    if (answer.unread !== "failed") setTimeout(() => current() && this.refresh(), POLL_MS);
    return undefined;
  }

  #show(found) {
    this.shown(found);
    if (!found) return byId("besideall").replaceChildren();
    const rows = found.changes.map((c) => html("tr", {}, html("td", {}, c.label),
      html("td", { class: c.sure ? "off" : null }, `${c.old} → ${c.new}`,
        html("span", { class: "was" }, `${c.difference}, ${c.verdict}`))));
    const path = api.besideFile(this.number, this.other);
    return byId("besideall").replaceChildren(
      html("p", {}, found.headline.join(" ")),
      html("table", {}, ...rows),
      html("ul", {}, ...found.blocks.map((b) =>
        html("li", {}, `${b.definition}: ${b.old} → ${b.new}, ${b.verdict}`))),
      ...found.cautions.map((line) => html("p", { class: "notice" }, line)),
      html("a", { href: path, onclick: (event) => {
        event.preventDefault();
        api.take(path);
      } }, "Take the comparison away (zip)"));
  }
}
