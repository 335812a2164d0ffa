// Drawing: one panel of spines on one canvas. Before is hollow, after is filled, held is dashed, failed is a
// cross, and what was never levelled leaves only a pale outline.

const ROW = 13; // px of each of the two rows of marks under the after panel: held, failed
const LABELS = 18; // px for folder or file names
const TOP = 4;
const BOTTOM = 6;

// frame gives the plot's edges inside a canvas. Narrow canvases have no room for a gutter at the right.
export function frame(width, height, extra) {
  const narrow = width < 560;
  return { left: narrow ? 42 : 52, right: width - (narrow ? 12 : 98), top: TOP, bottom: height - BOTTOM - extra, narrow, width, height };
}

export const EXTRA = 2 * ROW + LABELS;

export function prepare(canvas) {
  const { width, height } = canvas.getBoundingClientRect();
  const ratio = window.devicePixelRatio || 1;
  if (canvas.width !== Math.round(width * ratio) || canvas.height !== Math.round(height * ratio)) {
    canvas.width = Math.round(width * ratio);
    canvas.height = Math.round(height * ratio);
  }
  const pen = canvas.getContext("2d");
  pen.setTransform(ratio, 0, 0, ratio, 0, 0);
  pen.clearRect(0, 0, width, height);
  return { pen, width, height };
}

export class Panel {
  constructor(pen, box, scale, ink, font) {
    Object.assign(this, { pen, box, scale, ink, font });
    this.ratio = window.devicePixelRatio || 1;
  }

  y(value) {
    const { low, high } = this.scale;
    const share = (Math.min(Math.max(value, low - 2), high) - low) / (high - low);
    return this.box.bottom - share * (this.box.bottom - this.box.top);
  }

  text(words, x, y, { align = "left", weight = 400, colour = this.ink.soft, size = 12 } = {}) {
    this.pen.font = `${weight} ${size}px ${this.font}`;
    this.pen.textAlign = align;
    this.pen.textBaseline = "middle";
    this.pen.fillStyle = colour;
    this.pen.fillText(words, x, y);
  }

  // grid leaves out a figure that the target, where it stands in the same gutter, would touch.
  grid(target) {
    const { pen, box } = this;
    pen.lineWidth = 1;
    pen.strokeStyle = this.ink.hair;
    for (const tick of this.scale.ticks) {
      const y = Math.round(this.y(tick)) + 0.5;
      line(pen, box.left, y, box.right, y);
      if (this.box.narrow && Math.abs(y - this.y(target)) < 13) continue;
      this.text(tick < 0 ? `−${-tick}` : String(tick), box.left - 10, y, { align: "right" });
    }
  }

  target(lufs, words) {
    const { pen, box } = this;
    const y = Math.round(this.y(lufs)) + 0.5;
    pen.strokeStyle = this.ink.ink;
    pen.lineWidth = 1;
    pen.setLineDash([1, 3]);
    line(pen, box.left, y, box.right, y);
    pen.setLineDash([]);
    if (box.narrow) {
      this.text(words, box.left - 7, y, { align: "right", weight: 700, colour: this.ink.ink });
      return;
    }
    line(pen, box.right, y, box.right + 6, y);
    this.text("target", box.right + 11, y - 8);
    this.text(`${words} LUFS`, box.right + 11, y + 8, { weight: 700, colour: this.ink.ink, size: 13 });
  }

  // snap moves an edge onto a device pixel, so that thin outlines stay crisp.
  snap(x) { return Math.round(x * this.ratio) / this.ratio; }

  column(x, width, colour) {
    this.pen.fillStyle = colour;
    this.pen.fillRect(x, 0, width, this.box.height);
  }

  // hollow draws an outline with a solid notch; it stays open at the foot when it runs off the scale.
  hollow(x, width, bar, colour, dash = []) {
    const { pen } = this;
    const top = this.y(bar.head);
    const foot = this.y(bar.foot);
    const open = bar.foot < this.scale.low;
    const wall = width * this.ratio < 6 ? 1 / this.ratio : Math.max(1, Math.round(1.25 * this.ratio) / this.ratio);
    pen.strokeStyle = colour;
    pen.lineWidth = wall;
    pen.setLineDash(dash);
    pen.beginPath();
    pen.moveTo(x + wall / 2, foot);
    pen.lineTo(x + wall / 2, top);
    pen.lineTo(x + width - wall / 2, top);
    pen.lineTo(x + width - wall / 2, foot);
    if (!open) pen.closePath();
    pen.stroke();
    pen.setLineDash([]);
    if (!Number.isNaN(bar.low)) this.notch(x, width, bar, colour);
  }

  // bundle is the hollow bar of several: the outline of their feet and heads is thin, the box of their
  // loudness inside it firm, its middle a notch.
  bundle(x, width, bar, colour) {
    const { pen } = this;
    const [top, foot, high, low] = [bar.head, bar.foot, bar.high, bar.low].map((value) => this.snap(this.y(value)));
    pen.strokeStyle = colour;
    pen.lineWidth = 1;
    pen.globalAlpha = 0.5;
    pen.strokeRect(x + 0.5, top + 0.5, width - 1, Math.max(foot - top - 1, 1));
    pen.globalAlpha = 1;
    pen.strokeRect(x + 0.5, high + 0.5, width - 1, Math.max(low - high - 1, 1));
    this.notch(x, width, { low: bar.middle, high: bar.middle }, colour);
  }

  // solid fills a bar and cuts the notch out of it; a bar too low to be cut keeps its body.
  solid(x, width, bar, colour) {
    const middle = (this.y(bar.head) + this.y(bar.foot)) / 2;
    const tall = Math.max(this.y(bar.foot) - this.y(bar.head), 4);
    this.pen.fillStyle = colour;
    this.pen.beginPath();
    this.pen.roundRect(x, middle - tall / 2, width, tall, Math.min(width / 5, 1.5));
    this.pen.fill();
    if (tall >= 8) this.notch(x, width, bar, this.ink.sheet);
  }

  notch(x, width, bar, colour) {
    const from = this.y(bar.high);
    const tall = Math.max(this.y(bar.low) - from, 2);
    this.pen.fillStyle = colour;
    this.pen.fillRect(x, tall === 2 ? (from + this.y(bar.low)) / 2 - 1 : from, width, tall);
  }

  // peak is a dot where there is room for dots, else a thin tick: ticks of neighbours make a calm line.
  peak(x, width, value, colour, filled) {
    if (Number.isNaN(value)) return;
    const { pen } = this;
    const y = this.y(value);
    if (width < 5) {
      pen.globalAlpha = 0.7;
      pen.fillStyle = colour;
      pen.fillRect(x, y - 0.5, width, 1);
      pen.globalAlpha = 1;
      return;
    }
    pen.beginPath();
    pen.arc(x + width / 2, y, Math.min(1.2 + width / 24, 2.2) + (filled ? 0 : 0.2), 0, 2 * Math.PI);
    if (filled) {
      pen.fillStyle = colour;
      pen.fill();
    } else {
      pen.lineWidth = 1;
      pen.strokeStyle = colour;
      pen.stroke();
    }
  }

  // row gives the middle of a row of marks: 0 is held, 1 is failed.
  row(i) { return this.box.bottom + BOTTOM + (i + 0.5) * ROW; }

  cross(x, colour) {
    const { pen } = this;
    const y = this.row(1);
    pen.strokeStyle = colour;
    pen.lineWidth = 1.5;
    line(pen, x - 3, y - 3, x + 3, y + 3);
    line(pen, x - 3, y + 3, x + 3, y - 3);
  }

  doubt(x, colour) {
    const { pen } = this;
    pen.strokeStyle = colour;
    pen.lineWidth = 1;
    pen.setLineDash([2, 1.5]);
    pen.strokeRect(this.snap(x) - 1.5, this.row(0) - 4.5, 4, 8);
    pen.setLineDash([]);
  }

  // share is the mark of a bundle: the taller, the more of its recordings are held (hollow) or failed (solid).
  share(i, x, width, part, colour) {
    if (!part) return;
    const { pen } = this;
    const tall = Math.max(Math.round(part * (ROW - 2)), 2);
    const y = Math.round(this.row(i) + ROW / 2 - 1) - tall;
    pen.lineWidth = 1;
    pen.strokeStyle = colour;
    pen.fillStyle = colour;
    if (i === 0) pen.strokeRect(x + 0.5, y + 0.5, width - 1, tall);
    else pen.fillRect(x + Math.floor(width / 2) - 1, y, 2, tall + 1);
  }

  rowNames(held, failed) {
    if (this.box.narrow) return;
    if (held) this.text("held", this.box.right + 11, this.row(0));
    if (failed) this.text("failed", this.box.right + 11, this.row(1));
  }

  // label writes a name under a stretch of bars, shortened to fit; nothing where a few letters would not.
  label(words, from, to, centred = false) {
    const { pen } = this;
    pen.font = `400 12px ${this.font}`;
    const room = to - from - 8;
    let shown = words;
    while (shown.length > 3 && pen.measureText(shown).width > room) shown = `${shown.replace("…", "").slice(0, -1)}…`;
    if (pen.measureText(shown).width > room || (shown !== words && shown.length < 4)) return;
    if (centred) this.text(shown, (from + to) / 2, this.box.height - LABELS / 2, { align: "center" });
    else this.text(shown, from + 4, this.box.height - LABELS / 2);
  }

  divide(x) {
    this.pen.strokeStyle = this.ink.hair;
    this.pen.lineWidth = 1;
    line(this.pen, Math.round(x) + 0.5, this.box.height - LABELS, Math.round(x) + 0.5, this.box.height);
  }
}

function line(pen, x1, y1, x2, y2) {
  pen.beginPath();
  pen.moveTo(x1, y1);
  pen.lineTo(x2, y2);
  pen.stroke();
}
