// The band under the curves: a thick bar where there is speech, a thin line where something else is heard, and
// nothing in a pause.

const LIKELY = 50; // percent from which a step counts as speech

// stretches joins the steps of a reading's course; null if speech was not looked for. Pauses are left out.
export function stretches(reading, step) {
  if (!reading?.active || !reading.speech) return null;
  const found = [];
  reading.active.forEach((active, i) => {
    if (!active) return;
    const speech = reading.speech[i] >= LIKELY;
    const last = found.at(-1);
    if (last && last.end === i && last.speech === speech) last.end = i + 1;
    else found.push({ start: i, end: i + 1, speech });
  });
  return found.map(({ start, end, speech }) => ({ from: start * step, to: end * step, speech }));
}

// heardAt says what there is at a moment.
export function heardAt(band, seconds) {
  const here = band.find(({ from, to }) => from < seconds && seconds <= to + 1e-6);
  if (!here) return "pause";
  return here.speech ? "speech" : "no speech";
}

// A stretch narrower than a pixel covers its part of it, so that a long recording shows shares as shades.
export function drawBand(u, { band, ink, top, height }) {
  const { ctx: pen, bbox } = u;
  const thin = Math.max(Math.round(height / 5), 1);
  pen.save();
  pen.beginPath();
  pen.rect(bbox.left, top, bbox.width, height);
  pen.clip();
  pen.fillStyle = ink.soft;
  for (const { from, to, speech } of band) {
    const left = u.valToPos(from, "x", true);
    const width = u.valToPos(to, "x", true) - left;
    if (left > bbox.left + bbox.width || left + width < bbox.left) continue;
    if (speech) pen.fillRect(left, top, width, height);
    else pen.fillRect(left, top + Math.round((height - thin) / 2), width, thin);
  }
  pen.restore();
}
