// The course of a recording's loudness: before as a hollow line, after as a solid one, on one scale.
// A click goes to that moment in the player, a drag looks closer.
import uPlot from "../../vendor/uplot/uPlot.esm.js";
import { get } from "../../api.js";
import { colours, el, onTheme, parts } from "../../dom.js";
import { clock, number } from "../../figures.js";
import { drawBand, heardAt } from "./band.js";
import { columns, extent } from "./curves.js";
import { FaultMarks, faultsOf } from "./faults.js";
import { marks } from "./marks.js";
import { RideStrip } from "./ride.js";

const TOKENS = ["ink", "soft", "hair", "edge", "sheet", "before", "after", "held"];
const AXIS = 30; // px for the times under the plot
const BAND = { from: 14, height: 10 }; // px under the plot: the marks of faults reach down to there
const SYNC = { key: "course", scales: ["x", null] }; // one moment in both charts
const FONT = '"Atkinson Hyperlegible", system-ui, sans-serif';

export function mount(root) {
  document.head.append(el("link", { rel: "stylesheet", href: root.dataset.sheet }));
  const part = parts(root);
  const chart = new Timeline(root, part);
  part.again.addEventListener("click", () => chart.load());
  chart.load();
}

class Timeline {
  constructor(root, part) {
    Object.assign(this, { root, part, playhead: NaN });
    this.shown = { momentary: false, peak: false };
    this.target = parseFloat(root.dataset.target);
    this.ceiling = parseFloat(root.dataset.ceiling);
    this.faults = faultsOf(document);
  }

  async load() {
    const { state, again } = this.part;
    again.hidden = true;
    state.hidden = false;
    state.textContent = "Fetching the course of its loudness …";
    try {
      this.curves = columns(await get(this.root.dataset.url));
      if (!this.curves.x.length) {
        state.textContent = "Its course was not kept. Measure it again to see it here.";
        return;
      }
      state.hidden = true;
      await document.fonts.load(`12px ${FONT}`);
      this.start();
    } catch (error) {
      state.textContent = error.message;
      again.hidden = false;
    }
  }

  start() {
    const { tools, plot, whole, band, faults, ride } = this.part;
    this.reads = plot.appendChild(el("div", { class: "reads", hidden: true }));
    this.marks = new FaultMarks(this.faults, (words, x) => {
      this.atMark = Boolean(words);
      this.tell(words, x);
    });
    band.hidden = !this.curves.band;
    faults.hidden = !this.faults.length;
    if (this.curves.ride) {
      ride.hidden = false;
      this.strip = new RideStrip(ride, this.curves.ride);
    }
    this.build();
    tools.hidden = false;
    for (const box of tools.querySelectorAll("[data-series]")) {
      box.addEventListener("change", () => {
        this.shown[box.dataset.series] = box.checked;
        this.build();
      });
    }
    whole.addEventListener("click", () => this.build());
    new ResizeObserver(() => {
      this.chart.setSize(this.size());
      this.strip?.resize(this.size().width);
    }).observe(plot);
    onTheme(() => this.build());
    this.root.addEventListener("playhead", (event) => {
      this.playhead = event.detail;
      this.chart.redraw(false);
      this.strip?.redraw();
    });
    this.root.dispatchEvent(new CustomEvent("asked"));
  }

  size() {
    const { clientWidth } = this.part.plot;
    return { width: clientWidth - (clientWidth < 560 ? 0 : 16), height: clientWidth < 560 ? 256 : 320 };
  }

  build() {
    this.chart?.destroy();
    const ink = colours(...TOKENS);
    const { momentary, peak } = this.shown;
    const [low, high] = extent(this.curves, peak);
    const held = this.root.dataset.state === "held";
    const after = held ? { stroke: ink.held, width: 2, dash: [5, 3] } : { stroke: ink.after, width: 2 };
    const line = (style) => ({ points: { show: false }, ...style });
    const axis = { stroke: ink.soft, font: `12px ${FONT}`, grid: { stroke: ink.hair, width: 1 }, ticks: { show: false }, gap: 8 };
    const { band } = this.curves;
    const below = band ? BAND.from + BAND.height : this.faults.length ? BAND.from : 0;
    const padding = [14, 26, 0, 0];
    const level = { ...axis, size: 48, gap: 14 };
    this.strip?.build({
      width: this.size().width, ink, font: FONT, axis: level, padding, sync: SYNC,
      playhead: () => this.playhead, faults: () => this.marks.heads, placed: (u) => this.seekable(u),
    });
    const options = {
      ...this.size(),
      padding,
      legend: { show: false },
      scales: { x: { time: false, range: (_, from, to) => [from <= this.curves.x[0] ? 0 : from, to] }, y: { range: [low, high] } },
      cursor: { y: false, points: { show: false }, drag: { x: true, y: false }, sync: SYNC },
      series: [{},
        line({ stroke: ink.before, width: 1, alpha: 0.55, show: momentary }),
        line({ stroke: ink.after, width: 1, alpha: 0.55, show: momentary }),
        line({ stroke: ink.before, width: 1, dash: [1, 2], show: peak }),
        line({ stroke: ink.after, width: 1, show: peak, alpha: 0.7 }),
        line({ stroke: ink.before, width: 4 }),
        line({ stroke: ink.sheet, width: 2 }),
        line(after)],
      axes: [
        { ...axis, grid: { show: false }, size: AXIS + below, gap: axis.gap + below, values: (_, splits) => splits.map((s) => clock(s, splits.length > 1 && splits[1] - splits[0] < 1 ? 1 : 0)), incrs: [0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900, 1800, 3600] },
        { ...level, space: 32, incrs: [5, 10, 20], values: (_, splits) => splits.map((v) => number(v, 0)) },
      ],
      hooks: {
        draw: [(u) => {
          const ratio = devicePixelRatio;
          if (band) drawBand(u, { band, ink, top: u.bbox.top + u.bbox.height + BAND.from * ratio, height: BAND.height * ratio });
          if (this.marks.place(u)) this.strip?.redraw();
          marks(u, { ink, font: FONT, target: this.target, ceiling: peak ? this.ceiling : NaN, faults: this.marks.heads, playhead: this.playhead });
        }],
        setCursor: [(u) => this.read(u)],
        setScale: [(u, key) => {
          if (key !== "x") return;
          const { min, max } = u.scales.x;
          this.part.whole.hidden = max - min > this.curves.x.at(-1) * 0.98;
          this.strip?.zoom(min, max);
        }],
        ready: [(u) => this.seekable(u)],
      },
    };
    const c = this.curves;
    this.chart = new uPlot(options, [c.x, c.before.momentary, c.after.momentary, c.before.peak, c.after.peak, c.before.shortTerm, c.before.shortTerm, c.after.shortTerm], this.part.plot);
  }

  // seekable tells a click from the end of a drag by how far the pointer went.
  seekable(u) {
    let from = 0;
    u.over.addEventListener("pointerdown", (event) => { from = event.clientX; });
    u.over.addEventListener("click", (event) => {
      if (Math.abs(event.clientX - from) > 4) return;
      this.root.dispatchEvent(new CustomEvent("seek", { detail: u.posToVal(u.cursor.left, "x") }));
    });
  }

  read(u) {
    if (this.atMark) return;
    const { idx, left } = u.cursor;
    if (idx == null || left < 0) {
      this.tell("");
      return;
    }
    const at = (curve) => number(curve.shortTerm[idx] ?? NaN);
    const c = this.curves;
    const heard = c.band ? `, ${heardAt(c.band, c.x[idx])}` : "";
    const gain = this.strip ? `, ${this.strip.at(c.x[idx])}` : "";
    this.tell(`${clock(c.x[idx])}: ${at(c.before)}${c.hasAfter ? ` → ${at(c.after)}` : ""} LUFS${gain}${heard}`, left + u.bbox.left / devicePixelRatio);
  }

  // tell shows words beside the place they are about, x from the left; "" shows none.
  tell(words, x) {
    this.reads.hidden = !words;
    this.reads.textContent = words;
    if (!words) return;
    const wide = this.reads.offsetWidth;
    const room = this.part.plot.clientWidth;
    const left = x + wide + 24 > room ? x - wide - 4 : x + 20;
    this.reads.style.left = `${Math.max(Math.min(left, room - wide - 4), 4)}px`;
  }
}
