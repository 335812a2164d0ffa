// Figures as the pages write them: a true minus, one decimal, an en dash for what is not defined.
export const defined = (value) => typeof value === "number" && Number.isFinite(value);

export function number(value, decimals = 1) {
  if (!defined(value)) return "–";
  const text = Math.abs(value).toFixed(decimals);
  return value < 0 && Number(text) !== 0 ? `−${text}` : text;
}

export const count = (n) => n.toLocaleString("en");

export const plural = (n, one, many) => `${count(n)} ${n === 1 ? one : many}`;

// clock writes a place in a recording: 0:03.2, 1:02:03.4.
export function clock(seconds, decimals = 1) {
  const unit = 10 ** decimals;
  const total = Math.round(Math.max(seconds, 0) * unit) / unit;
  const hours = Math.floor(total / 3600);
  const minutes = Math.floor(total / 60) % 60;
  const rest = (total % 60).toFixed(decimals).padStart(decimals ? 3 + decimals : 2, "0");
  return hours ? `${hours}:${String(minutes).padStart(2, "0")}:${rest}` : `${minutes}:${rest}`;
}

export const stateWords = {
  "": "not levelled yet", waiting: "waiting", working: "being worked on", done: "done",
  held: "held for a listen", failed: "failed", cancelled: "cancelled",
};
