// Marks of faults on the time axis: buttons that tell what is wrong there and play it.
import { el } from "../../dom.js";
import { clock } from "../../figures.js";

const APART = 26; // px between two marks; closer ones become one, for neither would be easy to press
const TOLD = 4; // faults a tip has words for; more would cover the chart

// faultsOf reads the lists on the page: doubts about the copy and faults of the source. What concerns the recording
// as a whole has no place on the axis; a fault that is a doubt too is marked once.
export function faultsOf(page) {
  const told = new Map();
  for (const item of page.querySelectorAll("[data-doubts] [data-at], [data-faults] [data-at]")) {
    const { at, words } = item.dataset;
    if (!told.has(at + words)) told.set(at + words, { at: Number(at), words, listen: item.querySelector("[data-seek]") });
  }
  return [...told.values()].sort((a, b) => a.at - b.at);
}

// clusters puts marks that would cover each other together. place gives each fault's distance from the left.
export function clusters(faults, place) {
  const found = [];
  for (const fault of faults) {
    const x = place(fault);
    const last = found.at(-1);
    if (last && x - last.x < APART) last.faults.push(fault);
    else found.push({ x, faults: [fault] });
  }
  return found;
}

export class FaultMarks {
  // tip shows words at a distance from the left; no words, no tip.
  constructor(faults, tip) {
    Object.assign(this, { faults, tip, shown: "", heads: [] });
    this.box = el("div");
  }

  // place puts the marks that are in view where they belong on the chart, and says whether they are others than
  // before. heads are the first faults of each.
  place(u) {
    const { over, scales: { x: { min, max } } } = u;
    const inView = this.faults.filter(({ at }) => at >= min && at <= max);
    const marks = clusters(inView, ({ at }) => over.offsetLeft + u.valToPos(at, "x"));
    this.heads = marks.map(({ faults: [first] }) => first);
    const shown = marks.map(({ faults }) => faults.map(({ at }) => at).join()).join(";");
    const others = shown !== this.shown;
    if (others || this.box.parentNode !== over.parentNode) { // a mark that goes takes its tip along
      this.shown = shown;
      this.tip("");
      this.box.replaceChildren(...marks.map(({ faults }) => this.button(faults)));
      over.parentNode.append(this.box);
    }
    marks.forEach(({ x }, i) => {
      const { style } = this.box.children[i];
      style.left = `${x}px`;
      style.top = `${over.offsetTop + over.offsetHeight}px`;
    });
    return others;
  }

  button(faults) {
    const many = faults.length > 1;
    const told = faults.slice(0, TOLD).map((fault) => `${clock(fault.at)}: ${fault.words}`);
    const words = [...told, ...(faults.length > TOLD ? [`and ${faults.length - TOLD} more`] : [])].join("\n");
    const button = el("button", { type: "button", class: many ? "fault-mark is-many" : "fault-mark", "aria-label": `Listen at ${words}` },
      many ? el("span", {}, String(faults.length)) : null);
    for (const on of ["pointerenter", "focus"]) button.addEventListener(on, () => this.tip(words, parseFloat(button.style.left)));
    for (const off of ["pointerleave", "blur"]) button.addEventListener(off, () => this.tip(""));
    button.addEventListener("click", () => faults[0].listen.click());
    return button;
  }
}
