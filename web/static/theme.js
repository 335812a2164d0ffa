// Runs before the first paint, so that a chosen theme does not flash up as the other one.
(() => {
  try {
    const chosen = localStorage.getItem("theme");
    if (chosen === "light" || chosen === "dark") document.documentElement.dataset.theme = chosen;
  } catch {
    // Storage may be forbidden; the system's preference then decides.
  }
})();
