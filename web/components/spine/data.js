// The figures of a shelf as typed arrays, and the orders its spines can stand in.

export const STATES = ["", "waiting", "working", "done", "held", "failed", "cancelled"];
const [, , , DONE, HELD, FAILED] = STATES.keys();

export class Shelf {
  constructor({ columns, rows, target_lufs }) {
    const at = Object.fromEntries(columns.map((name, index) => [name, index]));
    const numbers = (name) => Float32Array.from(rows, (row) => row[at[name]] ?? NaN);
    const reading = (kind) => ({
      lufs: numbers(`${kind}_lufs`), p10: numbers(`${kind}_p10`), p95: numbers(`${kind}_p95`), peak: numbers(`${kind}_peak`),
    });
    this.total = rows.length;
    this.target = target_lufs;
    this.ids = rows.map((row) => row[at.id]);
    this.paths = rows.map((row) => row[at.path]);
    this.state = Uint8Array.from(rows, (row) => Math.max(STATES.indexOf(row[at.state] ?? ""), 0));
    this.before = reading("before");
    this.after = reading("after");
    this.orders = new Map();
  }

  name(i) { return this.paths[i].slice(this.paths[i].lastIndexOf("/") + 1); }
  folder(i) { return this.paths[i].slice(0, this.paths[i].lastIndexOf("/") + 1); }

  isDone = (i) => this.state[i] === DONE && !Number.isNaN(this.after.lufs[i]);
  isHeld = (i) => this.state[i] === HELD;
  isFailed = (i) => this.state[i] === FAILED;

  // order is a permutation of all recordings. Those without the figure stand at the end.
  order(by) {
    if (!this.orders.has(by)) {
      const order = Uint32Array.from({ length: this.total }, (_, i) => i);
      const compare = this.comparison(by);
      this.orders.set(by, order.sort((a, b) => compare(a, b) || a - b));
    }
    return this.orders.get(by);
  }

  comparison(by) {
    const text = (keys) => (a, b) => (keys[a] < keys[b] ? -1 : keys[a] > keys[b] ? 1 : 0);
    const figure = (of) => (a, b) => {
      const [x, y] = [of(a), of(b)];
      if (Number.isNaN(x) || Number.isNaN(y)) return Number.isNaN(x) - Number.isNaN(y);
      return x - y;
    };
    switch (by) {
      case "loudness": return figure((i) => this.before.lufs[i]);
      case "range": return figure((i) => this.before.p95[i] - this.before.p10[i]);
      case "name": return text(this.paths.map((_, i) => this.name(i).toLowerCase()));
      default: {
        const folder = text(this.paths.map((_, i) => this.folder(i)));
        const path = text(this.paths);
        return (a, b) => folder(a, b) || path(a, b);
      }
    }
  }
}
