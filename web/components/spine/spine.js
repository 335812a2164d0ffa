// The spine chart: two panels over one order and one scale. This module holds what is shown and when to draw;
// gestures.js turns keys, wheel and pointer into calls of it.
import { get } from "../../api.js";
import { colours, onTheme, parts } from "../../dom.js";
import { count, defined, number } from "../../figures.js";
import { EXTRA, Panel, frame, prepare } from "./draw.js";
import { Shelf } from "./data.js";
import { LEAST, axis, gather, panned, slots, spine, within, zoomed } from "./maths.js";
import { figuresTable } from "./table.js";
import { listen } from "./gestures.js";
import { fill, sentence } from "./tip.js";

const LEAST_PITCH = 3; // px a bar; with less room neighbours share one …
const BUNDLE_PITCH = 9; // … which is this wide, so that it can be drawn hollow
const GLIDE = 700; // ms from before to after when the chart first appears

export function mount(root) {
  return new SpineChart(root);
}

export class SpineChart {
  constructor(root) {
    this.root = root;
    this.part = parts(root);
    this.by = "folder";
    this.at = -1; // the bar under the pointer or the keyboard
    this.drag = null;
    this.part.again.addEventListener("click", () => this.load());
    new IntersectionObserver((seen, watcher) => {
      if (!seen.some((entry) => entry.isIntersecting)) return;
      watcher.disconnect();
      this.load();
    }, { rootMargin: "400px" }).observe(root);
  }

  async load() {
    const { veil, state, again } = this.part;
    const many = Number(this.root.dataset.count);
    again.hidden = true;
    state.textContent = many > 2000 ? `Fetching the figures of ${count(many)} recordings …` : "Fetching the figures …";
    try {
      const [answer] = await Promise.all([get(this.root.dataset.url), document.fonts.load('700 12px "Atkinson Hyperlegible"'), document.fonts.load('400 12px "Atkinson Hyperlegible"')]);
      this.show(new Shelf(answer));
      veil.hidden = true;
    } catch (error) {
      state.textContent = error.message;
      again.hidden = false;
    }
  }

  show(shelf) {
    const first = !this.shelf;
    this.shelf = shelf;
    this.view = { from: 0, to: shelf.total };
    const all = shelf.order("folder");
    this.before = gather(shelf.before.lufs, all, 0, shelf.total);
    const peaks = gather(shelf.before.peak, all, 0, shelf.total);
    this.scale = axis(gather(shelf.before.p10, all, 0, shelf.total), peaks[peaks.length - 1]);
    this.tell();
    this.part.figures?.replaceChildren(figuresTable(shelf));
    for (const option of document.querySelectorAll(".newrun datalist")) {
      if (this.root.parentElement.contains(option)) this.offerFolders(option);
    }
    if (first) {
      this.part.tools.hidden = !this.part.figures;
      listen(this);
      new ResizeObserver(() => this.measure()).observe(this.part.sheet);
      onTheme(() => {
        this.ink = null;
        this.draw();
      });
    }
    this.measure();
    this.glide();
  }

  offerFolders(list) {
    const folders = [...new Set(this.shelf.paths.map((_, i) => this.shelf.folder(i).slice(0, -1)))].filter(Boolean).sort();
    list.replaceChildren(...folders.slice(0, 300).map((folder) => new Option(folder)));
  }

  // tell says in words what the after panel shows; only the figures of all recordings can.
  tell() {
    const { shelf } = this;
    const tolerance = Number(this.root.dataset.tolerance);
    if (!defined(shelf.target) || !tolerance) return;
    const done = gather(shelf.after.lufs, shelf.order("folder"), 0, shelf.total, shelf.isDone);
    if (!done.length) return;
    const words = [`${count(within(done, shelf.target, tolerance))} within ${number(tolerance)} LU of the target`];
    const held = shelf.state.reduce((n, _, i) => n + shelf.isHeld(i), 0);
    const failed = shelf.state.reduce((n, _, i) => n + shelf.isFailed(i), 0);
    if (held) words.push(`${count(held)} held for a listen`);
    if (failed) words.push(`${count(failed)} failed`);
    this.part["told-after"].textContent = words.join(", ");
  }

  // glide lets the spines move from where they were to where they are: what levelling did, shown once.
  glide() {
    this.progress = 1;
    if (matchMedia("(prefers-reduced-motion: reduce)").matches || this.bars.length > 400) return;
    const start = performance.now();
    const step = (now) => {
      const t = Math.min((now - start) / GLIDE, 1);
      this.progress = 1 - (1 - t) ** 3;
      this.draw();
      if (t < 1) requestAnimationFrame(step);
    };
    this.progress = 0;
    requestAnimationFrame(step);
  }

  sort(by) {
    this.by = by;
    this.at = -1;
    this.measure();
  }

  zoom(factor, at = 0.5) { this.look(zoomed(this.view, this.shelf.total, factor, at)); }
  pan(by) { this.look(panned(this.view, this.shelf.total, by)); }
  whole() { this.look({ from: 0, to: this.shelf.total }); }

  look(view) {
    this.view = view;
    this.at = -1;
    this.part.tip.hidden = true;
    this.measure();
  }

  // measure decides which recordings share a bar, and sums them up; draw only paints the result.
  measure() {
    const { shelf, view } = this;
    const box = frame(this.part.before.clientWidth, 0, 0);
    const order = shelf.order(this.by);
    const room = box.right - box.left;
    const count = view.to - view.from;
    this.shared = count * LEAST_PITCH > room;
    const bounds = slots(view.from, view.to, this.shared ? room / BUNDLE_PITCH : count);
    this.pitch = room / Math.max(bounds.length - 1, 1);
    this.left = box.left;
    this.bars = Array.from({ length: bounds.length - 1 }, (_, i) => this.bar(order, bounds[i], bounds[i + 1]));
    this.stretches = this.by === "folder" ? stretches(order, view, (i) => shelf.folder(i)) : [];
    this.most = { held: Math.max(...this.bars.map((bar) => bar.heldCount)), failed: Math.max(...this.bars.map((bar) => bar.failed)) };
    this.draw();
    this.window();
  }

  bar(order, a, b) {
    const { shelf } = this;
    const before = spine(shelf.before, order, a, b);
    const after = spine(shelf.after, order, a, b, shelf.isDone);
    const held = spine(shelf.after, order, a, b, shelf.isHeld);
    let [heldCount, failed] = [0, 0];
    for (let i = a; i < b; i++) {
      heldCount += shelf.isHeld(order[i]);
      failed += shelf.isFailed(order[i]);
    }
    return { a, b, size: b - a, first: order[a], before, after, held, heldCount, failed, shown: after.count ? after : held };
  }

  draw() {
    if (!this.shelf) return;
    this.ink ??= colours("ink", "soft", "hair", "edge", "press", "sheet", "before", "after", "held");
    this.font ??= getComputedStyle(this.root).fontFamily;
    for (const kind of ["before", "after"]) {
      const { pen, width, height } = prepare(this.part[kind]);
      const { shelf } = this;
      const box = frame(width, height, kind === "after" ? EXTRA : 0);
      const panel = new Panel(pen, box, this.scale, this.ink, this.font);
      this.backdrop(panel);
      panel.grid(shelf.target);
      const wide = panel.snap(Math.min(Math.max(this.pitch * 0.66, 2), 20));
      this.bars.forEach((bar, i) => this.paint(panel, kind, bar, panel.snap(this.left + i * this.pitch + (this.pitch - wide) / 2), wide));
      if (defined(shelf.target)) panel.target(shelf.target, number(shelf.target, box.narrow && Number.isInteger(shelf.target) ? 0 : 1));
      if (kind === "after") this.labels(panel);
    }
  }

  backdrop(panel) {
    if (this.at >= 0) panel.column(this.left + this.at * this.pitch, Math.max(this.pitch, 2), panel.ink.press);
    if (this.drag) {
      const from = Math.min(this.drag.from, this.drag.to);
      panel.column(from, Math.abs(this.drag.to - this.drag.from), panel.ink.press);
    }
  }

  paint(panel, kind, bar, x, wide) {
    const { ink } = panel;
    const dots = this.part.peaks?.checked ?? true;
    if (kind === "before") {
      if (bar.before.count) panel[this.shared ? "bundle" : "hollow"](x, wide, bar.before, ink.before);
      if (dots) panel.peak(x, wide, bar.before.peak, ink.before, false);
      return;
    }
    if (bar.after.count) {
      panel.solid(x, wide, between(bar.before, bar.after, this.progress), ink.after);
      if (dots && this.progress === 1) panel.peak(x, wide, bar.after.peak, ink.after, true);
    } else if (bar.size === 1 && bar.held.count) {
      panel.hollow(x, wide, between(bar.before, bar.held, this.progress), ink.held, [3, 2]);
    } else if (bar.before.count) {
      panel.hollow(x, wide, { ...bar.before, low: NaN }, ink.edge);
    }
    if (this.shared) {
      panel.share(0, x, wide, bar.heldCount / this.most.held, ink.held);
      panel.share(1, x, wide, bar.failed / this.most.failed, ink.ink);
    } else if (bar.failed) panel.cross(x + wide / 2, ink.ink);
    else if (bar.heldCount && !bar.held.count) panel.doubt(x + wide / 2, ink.held);
  }

  // labels names the folders the spines stand in, or, where there is room, every recording.
  labels(panel) {
    const x = (place) => this.left + ((place - this.view.from) / (this.view.to - this.view.from)) * this.pitch * this.bars.length;
    panel.rowNames(this.shared && this.most.held, this.most.failed);
    if (!this.shared && this.pitch > 56) {
      this.bars.forEach((bar, i) => panel.label(this.shelf.name(bar.first), this.left + i * this.pitch, this.left + (i + 1) * this.pitch, true));
      return;
    }
    for (const { from, to, folder } of this.stretches) {
      if (x(to) - x(from) < 24) continue;
      if (from > this.view.from) panel.divide(x(from));
      panel.label(folder.slice(0, -1) || "/", x(from), x(to));
    }
  }

  window() {
    const { view, shelf, part } = this;
    const width = view.to - view.from;
    const zoomed = width < shelf.total;
    part.track.hidden = !zoomed;
    part.thumb.style.left = `${(100 * view.from) / shelf.total}%`;
    for (const button of part.tools.querySelectorAll("[data-zoom]")) {
      button.disabled = button.dataset.zoom === "in" ? width <= Math.min(LEAST, shelf.total) : !zoomed;
    }
    part.thumb.style.width = `${(100 * width) / shelf.total}%`;
    if (!part.figures) return;
    const each = Math.round(width / Math.max(this.bars.length, 1));
    part.window.textContent = zoomed ? `${count(view.from + 1)} to ${count(view.to)} of ${count(shelf.total)}`
      : this.shared ? `about ${count(each)} recordings a bar` : "";
  }

  // barAt finds the bar under a place of the sheet, −1 beside the plot.
  barAt(x) {
    const i = Math.floor((x - this.left) / this.pitch);
    return i >= 0 && i < this.bars.length ? i : -1;
  }

  point(i, spoken = false) {
    if (i === this.at && !spoken) return;
    this.at = i;
    const { tip, live, sheet } = this.part;
    tip.hidden = i < 0;
    if (i >= 0) {
      const bar = this.bars[i];
      fill(tip, this.shelf, bar);
      const x = this.left + (i + 0.5) * this.pitch;
      const room = sheet.clientWidth - tip.offsetWidth - 8;
      tip.style.left = `${Math.min(Math.max(x + 18 > room ? x - tip.offsetWidth - 18 : x + 18, 8), Math.max(room, 8))}px`;
      tip.style.top = `${this.part.after.offsetTop - tip.offsetHeight / 2 - 20}px`;
      if (spoken) live.textContent = sentence(this.shelf, bar, i, this.bars.length);
    }
    this.draw();
  }

  // open goes to the recording; a bar that several share is zoomed into first.
  open(i) {
    const bar = this.bars[i];
    if (!bar) return;
    if (bar.size === 1) location.assign(`/recordings/${this.shelf.ids[bar.first]}`);
    else {
      const middle = (bar.a + bar.b) / 2;
      const width = Math.max(bar.size, Math.min(120, this.shelf.total));
      this.look(panned({ from: 0, to: width }, this.shelf.total, middle - width / 2));
    }
  }
}

// stretches finds where one folder ends and the next begins.
function stretches(order, view, folderOf) {
  const found = [];
  for (let i = view.from; i < view.to; i++) {
    const folder = folderOf(order[i]);
    if (found.at(-1)?.folder === folder) found.at(-1).to = i + 1;
    else found.push({ from: i, to: i + 1, folder });
  }
  return found;
}

function between(from, to, t) {
  if (t >= 1 || !from.count) return to;
  const mix = (key) => from[key] + (to[key] - from[key]) * t;
  return { ...to, foot: mix("foot"), head: mix("head"), low: mix("low"), high: mix("high") };
}
