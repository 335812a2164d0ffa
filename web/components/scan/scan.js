import { post } from "../../api.js";
import { say } from "../../dom.js";
import { count, plural } from "../../figures.js";

export function mount(button) {
  const says = document.getElementById(button.dataset.says);
  button.disabled = false;
  button.addEventListener("click", async () => {
    button.disabled = true;
    say(says, "Looking through the folder …");
    try {
      const result = await post(button.dataset.url);
      const changes = result.added + result.changed + result.moved + result.missing;
      const unread = result.unread ?? [];
      const words = changes
        ? `${plural(result.found, "recording", "recordings")}: ${count(result.added)} new, ${count(result.changed)} changed, ${result.moved ? `${count(result.moved)} moved, ` : ""}${count(result.missing)} gone.`
        : `${plural(result.found, "recording", "recordings")}, nothing new.`;
      say(says, unread.length ? `${words} Could not be looked into: ${unread.join(", ")}.` : words, unread.length > 0);
      if (changes && !unread.length) setTimeout(() => location.reload(), 1200);
    } catch (error) {
      say(says, error.message, true);
    }
    button.disabled = false;
  });
}
