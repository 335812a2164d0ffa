// The ride under the curves: the gain over time as a thin line on a small scale of its own, in step with the chart
// above it.
import uPlot from "../../vendor/uplot/uPlot.esm.js";
import { number } from "../../figures.js";
import { marks } from "./marks.js";

const HEIGHT = 104; // px
const LEAST = 6; // dB from foot to head, so that a ride of next to nothing looks like it

// rideOf makes columns of the API's ride, steady gain included; null if the gain stood still.
export function rideOf(ride, step) {
  if (!ride?.gain_db.length) return null;
  const { gain_db: gain, steady_db: steady } = ride;
  return { x: Float64Array.from(gain, (_, i) => i * step), db: Float64Array.from(gain, (db) => db + steady) };
}

// gainExtent gives the scale of gains: it holds 0, and ends a little past the least and the most.
export function gainExtent(db) {
  let [low, high] = [0, 0];
  for (const value of db) {
    low = Math.min(low, value);
    high = Math.max(high, value);
  }
  const more = Math.max(LEAST - (high - low), (high - low) / 8) / 2;
  return [low - more, high + more];
}

export const signed = (value, decimals = 1) => (value > 0 && Number(value.toFixed(decimals)) ? `+${number(value, decimals)}` : number(value, decimals));

export class RideStrip {
  constructor(plot, { x, db }) {
    Object.assign(this, { plot, x, db, range: gainExtent(db) });
  }

  // build draws it anew; axis and padding are those of the chart above, so that both share their times.
  build({ width, ink, font, axis, padding, sync, playhead, faults, placed }) {
    this.chart?.destroy();
    const [low, high] = this.range;
    this.chart = new uPlot({
      width, height: HEIGHT,
      padding: [6, padding[1], 8, padding[3]],
      legend: { show: false },
      scales: { x: { time: false }, y: { range: [low, high] } },
      cursor: { y: false, points: { show: false }, drag: { x: false, y: false }, sync },
      series: [{}, { stroke: ink.ink, width: 1.25, points: { show: false } }],
      axes: [{ show: false }, { ...axis, space: 22, incrs: [1, 2, 5, 10, 20], values: (_, splits) => splits.map((v) => signed(v, 0)) }],
      hooks: { drawAxes: [(u) => zero(u, ink)], draw: [(u) => marks(u, { ink, font, faults: faults(), playhead: playhead() })], ready: [placed] },
    }, [this.x, this.db], this.plot);
  }

  zoom(min, max) { this.chart?.setScale("x", { min, max }); }

  resize(width) { this.chart?.setSize({ width, height: HEIGHT }); }

  redraw() { this.chart?.redraw(false); }

  // at is the gain at a moment, in words.
  at(seconds) {
    const i = Math.min(Math.max(Math.round(seconds / (this.x[1] - this.x[0] || 1)), 0), this.db.length - 1);
    return `${signed(this.db[i])} dB`;
  }
}

function zero(u, ink) {
  const { ctx: pen, bbox } = u;
  const y = Math.round(u.valToPos(0, "y", true)) + 0.5;
  pen.save();
  pen.strokeStyle = ink.edge;
  pen.lineWidth = devicePixelRatio;
  pen.beginPath();
  pen.moveTo(bbox.left, y);
  pen.lineTo(bbox.left + bbox.width, y);
  pen.stroke();
  pen.restore();
}
