// Keys, wheel and pointer of the spine chart.

const CLICK = 5; // px a pointer may wander and still be a click

export function listen(chart) {
  const { sheet, tools, peaks } = chart.part;
  buttons(chart, tools);
  peaks?.addEventListener("change", () => chart.draw());
  sheet.addEventListener("keydown", (event) => key(chart, event));
  sheet.addEventListener("blur", () => chart.point(-1));
  pointer(chart, sheet);
  sheet.addEventListener("wheel", (event) => wheel(chart, sheet, event), { passive: false });
}

function buttons(chart, tools) {
  for (const button of tools.querySelectorAll("[data-sort]")) {
    button.addEventListener("click", () => {
      for (const other of tools.querySelectorAll("[data-sort]")) other.setAttribute("aria-pressed", String(other === button));
      chart.sort(button.dataset.sort);
    });
  }
  const zooms = { in: () => chart.zoom(0.5), out: () => chart.zoom(2), whole: () => chart.whole() };
  for (const button of tools.querySelectorAll("[data-zoom]")) button.addEventListener("click", zooms[button.dataset.zoom]);
}

function key(chart, event) {
  if (event.ctrlKey || event.metaKey || event.altKey || event.target !== chart.part.sheet) return;
  const last = chart.bars.length - 1;
  const width = chart.view.to - chart.view.from;
  const centre = chart.at < 0 ? 0.5 : (chart.at + 0.5) / chart.bars.length;
  const walk = (to) => chart.point(Math.min(Math.max(to, 0), last), true);
  const keys = {
    ArrowRight: () => (event.shiftKey ? chart.pan(width / 4) : chart.at === last ? step(chart, 1) : walk(chart.at + 1)),
    ArrowLeft: () => (event.shiftKey ? chart.pan(-width / 4) : chart.at === 0 ? step(chart, -1) : walk(chart.at < 0 ? last : chart.at - 1)),
    PageDown: () => walk(chart.at + 10),
    PageUp: () => walk(chart.at - 10),
    Home: () => walk(0),
    End: () => walk(last),
    "+": () => chart.zoom(0.5, centre),
    "=": () => chart.zoom(0.5, centre),
    "-": () => chart.zoom(2, centre),
    Escape: () => chart.whole(),
    Enter: () => chart.open(chart.at),
  };
  if (!keys[event.key]) return;
  event.preventDefault();
  keys[event.key]();
}

// step walks past the edge of a zoomed window: the window moves along, the mark stays at the edge.
function step(chart, by) {
  const at = chart.at;
  chart.pan(by * Math.max(chart.bars[at]?.size ?? 1, 1));
  chart.point(at, true);
}

function wheel(chart, sheet, event) {
  const zooming = event.ctrlKey || document.activeElement === sheet;
  const sideways = Math.abs(event.deltaX) > Math.abs(event.deltaY);
  if (!zooming && !sideways) return; // the page scrolls on until the chart has been asked to listen
  event.preventDefault();
  const width = chart.view.to - chart.view.from;
  const across = chart.pitch * chart.bars.length;
  if (sideways) chart.pan((event.deltaX / across) * width);
  else chart.zoom(Math.exp(Math.max(Math.min(event.deltaY, 200), -200) / 300), Math.min(Math.max((place(sheet, event) - chart.left) / across, 0), 1));
}

function pointer(chart, sheet) {
  const plot = (event) => event.target.tagName === "CANVAS";
  sheet.addEventListener("pointerdown", (event) => {
    if (event.button || !plot(event)) return;
    const x = place(sheet, event);
    chart.drag = { from: x, to: x, view: chart.view, marked: chart.at, touch: event.pointerType === "touch" };
    sheet.setPointerCapture(event.pointerId);
  });
  sheet.addEventListener("pointermove", (event) => {
    const x = place(sheet, event);
    if (!chart.drag) {
      chart.point(plot(event) ? chart.barAt(x) : -1);
      return;
    }
    chart.drag.to = x;
    if (chart.drag.touch) {
      const width = chart.drag.view.to - chart.drag.view.from;
      chart.view = chart.drag.view;
      chart.pan(((chart.drag.from - x) / (chart.pitch * chart.bars.length)) * width);
    } else if (Math.abs(x - chart.drag.from) > CLICK) {
      chart.part.tip.hidden = true;
      chart.draw();
    }
  });
  sheet.addEventListener("pointerup", () => {
    const { drag } = chart;
    if (!drag) return;
    chart.drag = null;
    const bar = chart.barAt(drag.to);
    if (Math.abs(drag.to - drag.from) <= CLICK) {
      if (drag.touch && bar !== drag.marked) chart.point(bar, true); // a first tap shows, a second one opens
      else chart.open(bar);
    } else if (!drag.touch) {
      const [a, b] = [Math.min(drag.from, drag.to), Math.max(drag.from, drag.to)].map((x) => chart.barAt(x));
      chart.look({ from: chart.bars[Math.max(a, 0)].a, to: (chart.bars[b] ?? chart.bars.at(-1)).b });
    }
  });
  sheet.addEventListener("pointercancel", () => {
    chart.drag = null;
    chart.draw();
  });
  sheet.addEventListener("pointerleave", () => {
    if (!chart.drag && document.activeElement !== sheet) chart.point(-1);
  });
}

const place = (sheet, event) => event.clientX - sheet.getBoundingClientRect().left - sheet.clientLeft;
