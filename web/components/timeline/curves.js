// The API's timeline as columns of one length for the chart. A value that is not defined (silence) is null
// and leaves a gap.
import { stretches } from "./band.js";
import { rideOf } from "./ride.js";

export function columns({ step_s: step, before, after, ride }) {
  const length = Math.max(before?.short_term.length ?? 0, after?.short_term.length ?? 0);
  const reading = (from) => ({
    shortTerm: padded(from?.short_term, length), momentary: padded(from?.momentary, length), peak: padded(from?.peak, length),
  });
  return {
    x: Float64Array.from({ length }, (_, i) => (i + 1) * step),
    before: reading(before),
    after: reading(after),
    hasAfter: Boolean(after),
    ride: rideOf(ride, step),
    band: stretches(before, step) ?? stretches(after, step),
  };
}

function padded(values, length) {
  const all = new Array(length).fill(null);
  values?.forEach((value, i) => { if (value > -100) all[i] = value; });
  return all;
}

const FILLING = 29; // steps until a passage of 3 seconds is whole; the quiet it begins with would stretch the scale

// extent gives the loudness scale: whole tens, no lower than −70, with room for peaks when they are shown.
export function extent({ before, after }, peaks) {
  let [low, high] = [0, -70];
  for (const reading of [before, after]) {
    const { length } = reading.shortTerm;
    reading.shortTerm.forEach((value, i) => {
      if (value == null) return;
      if (i >= FILLING || length <= FILLING) low = Math.min(low, value);
      high = Math.max(high, value);
    });
  }
  if (low > high) [low, high] = [-60, -10];
  return [Math.max(Math.floor((low - 1) / 10) * 10, -70), peaks ? 3 : Math.min(Math.ceil((high + 4) / 5) * 5, 3)];
}
