// The chart in figures: what a person reads who does not see it, or wants it exactly.
import { el } from "../../dom.js";
import { count, number } from "../../figures.js";
import { gather, quantile } from "./maths.js";

const STEPS = [["quietest", 0], ["a tenth are quieter than", 0.1], ["the middle one", 0.5], ["a tenth are louder than", 0.9], ["loudest", 1]];

export function figuresTable(shelf) {
  const order = shelf.order("folder");
  const before = gather(shelf.before.lufs, order, 0, shelf.total);
  const after = gather(shelf.after.lufs, order, 0, shelf.total, shelf.isDone);
  return el("table", { class: "table" },
    el("thead", {}, el("tr", {},
      el("th", { scope: "col" }, "Integrated loudness, LUFS"),
      el("th", { scope: "col", class: "n" }, `before (${count(before.length)})`),
      el("th", { scope: "col", class: "n" }, `after (${count(after.length)})`))),
    el("tbody", {}, ...STEPS.map(([words, q]) => el("tr", {},
      el("td", {}, words),
      el("td", { class: "n" }, number(quantile(before, q))),
      el("td", { class: "n" }, number(quantile(after, q)))))));
}
