// The chart's arithmetic: pure functions over arrays, so that they can be tested without a canvas.

// quantile of sorted values, linear between neighbours; NaN for none.
export function quantile(sorted, q) {
  if (!sorted.length) return NaN;
  const at = q * (sorted.length - 1);
  const low = Math.floor(at);
  return sorted[low] + (sorted[Math.min(low + 1, sorted.length - 1)] - sorted[low]) * (at - low);
}

// slots divides the places from … to − 1 among at most `most` bars, as evenly as whole numbers allow.
// The result holds one bound more than there are bars; bar i takes places bounds[i] … bounds[i + 1] − 1.
export function slots(from, to, most) {
  const n = Math.max(to - from, 0);
  const bars = Math.min(n, Math.max(Math.floor(most), 1));
  const bounds = new Uint32Array(bars + 1);
  for (let i = 0; i <= bars; i++) bounds[i] = from + Math.floor((i * n) / Math.max(bars, 1));
  return bounds;
}

// gather sorts the defined values of a column at places a … b − 1 of an order, for those that `take` accepts.
export function gather(column, order, a, b, take) {
  const values = new Float32Array(b - a);
  let n = 0;
  for (let i = a; i < b; i++) {
    const value = column[order[i]];
    if (value === value && (!take || take(order[i]))) values[n++] = value; // NaN alone is not itself
  }
  return values.subarray(0, n).sort();
}

// spine sums up recordings in one bar. One recording keeps its own figures exactly; of several, nine in ten
// feet and heads lie inside the bar; low and high span the middle eight tenths of the loudness.
export function spine(columns, order, a, b, take) {
  const feet = gather(columns.p10, order, a, b, take);
  const heads = gather(columns.p95, order, a, b, take);
  const notches = gather(columns.lufs, order, a, b, take);
  const peaks = gather(columns.peak, order, a, b, take);
  return {
    count: notches.length,
    foot: quantile(feet, 0.1),
    head: quantile(heads, 0.9),
    low: quantile(notches, 0.1),
    middle: quantile(notches, 0.5),
    high: quantile(notches, 0.9),
    peak: peaks.length ? peaks[peaks.length - 1] : NaN,
  };
}

// axis chooses a loudness scale for both panels: whole tens, down to where all but the quietest fiftieth of
// the feet fit, up to a little above the highest peak.
export function axis(feet, highestPeak) {
  const floor = quantile(feet, 0.02);
  const low = Math.min(Math.max(Number.isNaN(floor) ? -40 : Math.floor((floor - 1) / 10) * 10, -70), -40);
  const high = Math.min(Math.max(Number.isNaN(highestPeak) ? 0 : highestPeak, 0), 6) + 1.5;
  const ticks = [];
  for (let tick = 0; tick >= low; tick -= 10) ticks.push(tick);
  return { low, high, ticks };
}

// LEAST is how many places a window shows at its narrowest.
export const LEAST = 8;

// zoomed narrows or widens a window of places around `at` (0 … 1 of its width), never past the whole.
export function zoomed(view, total, factor, at) {
  const width = view.to - view.from;
  const next = Math.min(Math.max(Math.round(width * factor), Math.min(LEAST, total)), total);
  const from = Math.round(view.from + (width - next) * at);
  return clamped(from, next, total);
}

// panned moves a window by a number of places.
export function panned(view, total, by) {
  return clamped(Math.round(view.from + by), view.to - view.from, total);
}

function clamped(from, width, total) {
  const start = Math.min(Math.max(from, 0), total - width);
  return { from: start, to: start + width };
}

// within counts values no further than `tolerance` from a target; a hair is allowed for float32.
export function within(values, target, tolerance) {
  let n = 0;
  for (const value of values) if (Math.abs(value - target) <= tolerance + 1e-4) n++;
  return n;
}
