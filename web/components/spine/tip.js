// The figures of one bar: as a small table for the eye, as a sentence for the ear.
import { el } from "../../dom.js";
import { count, number, plural, stateWords } from "../../figures.js";
import { STATES } from "./data.js";

const FIGURES = [["loudness", "middle", "LUFS"], ["head", "head", "LUFS"], ["foot", "foot", "LUFS"], ["true peak", "peak", "dBTP"]];

export function fill(tip, shelf, bar) {
  const rows = FIGURES.map(([words, key, unit]) => el("tr", {},
    el("th", { scope: "row" }, words),
    el("td", {}, number(bar.before[key])),
    el("td", {}, number(bar.shown[key])),
    el("td", { class: "soft" }, unit)));
  const table = el("table", {},
    el("thead", {}, el("tr", {}, el("th"), el("th", {}, "before"), el("th", {}, "after"), el("th"))),
    el("tbody", {}, ...rows));
  tip.replaceChildren(...heading(shelf, bar), table);
}

function heading(shelf, bar) {
  if (bar.size === 1) {
    const i = bar.first;
    const state = STATES[shelf.state[i]];
    return [
      el("b", { dir: "auto" }, shelf.name(i)),
      shelf.folder(i) ? el("div", { class: "way", dir: "auto" }, shelf.folder(i)) : null,
      el("div", { class: `state is-${state || "never"}` }, stateWords[state]),
    ].filter(Boolean);
  }
  const counts = [[bar.after.count, "levelled"], [bar.heldCount, "held"], [bar.failed, "failed"]]
    .filter(([n]) => n).map(([n, words]) => `${count(n)} ${words}`);
  return [
    el("b", {}, plural(bar.size, "recording", "recordings")),
    el("div", { class: "way", dir: "auto" }, `from ${shelf.name(bar.first)}`),
    el("div", { class: "way" }, counts.join(", ") || "not levelled yet"),
  ];
}

export function sentence(shelf, bar, place, places) {
  const figures = `before ${number(bar.before.middle)} LUFS, after ${number(bar.shown.middle)} LUFS`;
  const where = `${count(place + 1)} of ${count(places)}`;
  if (bar.size > 1) {
    return `${plural(bar.size, "recording", "recordings")} from ${shelf.name(bar.first)}: typically ${figures}; ${count(bar.heldCount)} held, ${count(bar.failed)} failed. Bar ${where}.`;
  }
  return `${shelf.name(bar.first)}, ${stateWords[STATES[shelf.state[bar.first]]]}: ${figures}. Spine ${where}.`;
}
