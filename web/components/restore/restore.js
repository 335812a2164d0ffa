import { post } from "../../api.js";
import { parts, say } from "../../dom.js";

export function mount(button) {
  const dialog = document.getElementById(button.dataset.dialog);
  const form = dialog.querySelector("form");
  const says = form.querySelector(".says");
  const go = form.querySelector("button[type=submit]");
  button.disabled = false;
  button.addEventListener("click", () => {
    say(says, "");
    dialog.showModal();
  });
  parts(dialog).close.addEventListener("click", () => dialog.close());
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    go.disabled = true;
    try {
      await post(form.dataset.url);
      location.reload();
    } catch (error) {
      say(says, error.message, true);
      go.disabled = false;
    }
  });
}
