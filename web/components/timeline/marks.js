// What is drawn over the curves: target, ceiling, a line at each mark of a fault, and the place being heard.
import { defined, number } from "../../figures.js";

export function marks(u, { ink, font, target, ceiling, faults, playhead }) {
  const { ctx: pen, bbox } = u;
  const ratio = devicePixelRatio;
  const right = bbox.left + bbox.width;
  const bottom = bbox.top + bbox.height;
  pen.save();
  pen.lineWidth = ratio;
  pen.textBaseline = "alphabetic";
  pen.font = `700 ${12 * ratio}px ${font}`;

  for (const { at } of faults) {
    const x = Math.round(u.valToPos(at, "x", true)) + 0.5;
    if (x < bbox.left || x > right) continue;
    pen.strokeStyle = ink.held;
    pen.setLineDash([2 * ratio, 3 * ratio]);
    line(pen, x, bbox.top, x, bottom);
    pen.setLineDash([]);
  }

  const level = (value, words, dash) => {
    if (!defined(value)) return;
    const y = Math.round(u.valToPos(value, "y", true)) + 0.5;
    if (y < bbox.top || y > bottom) return;
    pen.strokeStyle = ink.ink;
    pen.setLineDash(dash.map((d) => d * ratio));
    line(pen, bbox.left, y, right, y);
    pen.setLineDash([]);
    pen.textAlign = "right";
    const wide = pen.measureText(words).width + 8 * ratio; // a ground, as curves may run under the words
    pen.fillStyle = ink.sheet;
    pen.globalAlpha = 0.85; // which do not vanish under it
    pen.fillRect(right - wide, y - 18 * ratio, wide, 16 * ratio);
    pen.globalAlpha = 1;
    pen.fillStyle = ink.ink;
    pen.fillText(words, right - 4 * ratio, y - 6 * ratio);
  };
  level(target, `target ${number(target)} LUFS`, [1, 3]);
  level(ceiling, `ceiling ${number(ceiling)} dBTP`, [6, 3]);

  if (defined(playhead)) {
    const x = Math.round(u.valToPos(playhead, "x", true)) + 0.5;
    if (x >= bbox.left && x <= right) {
      pen.strokeStyle = ink.ink;
      pen.lineWidth = 1.5 * ratio;
      line(pen, x, bbox.top, x, bottom);
    }
  }
  pen.restore();
}

function line(pen, x1, y1, x2, y2) {
  pen.beginPath();
  pen.moveTo(x1, y1);
  pen.lineTo(x2, y2);
  pen.stroke();
}
