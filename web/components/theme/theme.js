// The switch goes round: as the system says, light, dark. The choice stays in this browser.
const ROUND = { "": "light", light: "dark", dark: "" };
const WORDS = { "": "Theme: system", light: "Theme: light", dark: "Theme: dark" };

export function mount(button) {
  const root = document.documentElement;
  const show = () => { button.textContent = WORDS[root.dataset.theme ?? ""]; };
  button.addEventListener("click", () => {
    const next = ROUND[root.dataset.theme ?? ""];
    if (next) root.dataset.theme = next;
    else delete root.dataset.theme;
    try {
      localStorage.setItem("theme", next);
    } catch {
      // Not kept, then; the page still changes.
    }
    show();
  });
  show();
  button.hidden = false;
}
