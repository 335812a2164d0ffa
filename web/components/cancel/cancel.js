import { post } from "../../api.js";
import { say } from "../../dom.js";

// The first press asks, the second does it: no dialog, and no slip of the finger.
export function mount(button) {
  const says = document.getElementById(button.dataset.says);
  const words = button.textContent;
  let sure = false;
  button.disabled = false;
  button.addEventListener("click", async () => {
    if (!sure) {
      sure = true;
      button.textContent = "Really cancel?";
      return;
    }
    button.disabled = true;
    try {
      await post(button.dataset.url);
      location.reload();
    } catch (error) {
      say(says, error.message, true);
      button.disabled = false;
      button.textContent = words;
      sure = false;
    }
  });
  button.addEventListener("blur", () => {
    sure = false;
    button.textContent = words;
  });
}
