import { post } from "../../api.js";
import { say } from "../../dom.js";

export function mount(form) {
  const button = form.querySelector("button");
  const says = form.querySelector(".says");
  button.disabled = false;
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    button.disabled = true;
    try {
      const shelf = await post(form.dataset.url, { name: form.elements.name.value.trim(), root: form.elements.root.value.trim() });
      say(says, "Registered. Looking through the folder …");
      await post(`${form.dataset.url}/${shelf.id}/scan`);
      location.assign(`/shelves/${shelf.id}`);
    } catch (error) {
      say(says, error.message, true);
      button.disabled = false;
    }
  });
}
