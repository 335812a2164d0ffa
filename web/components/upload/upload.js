import { postFiles } from "../../api.js";
import { say } from "../../dom.js";
import { plural } from "../../figures.js";

export function mount(form) {
  const button = form.querySelector("button");
  const says = form.querySelector(".says");
  const input = form.elements.files;
  button.disabled = false;

  async function send(files) {
    if (!files.length) return;
    const body = new FormData();
    for (const file of files) body.append("files", file);
    button.disabled = true;
    say(says, `Sending ${plural(files.length, "file", "files")} …`);
    try {
      const result = await postFiles(form.dataset.url, body);
      const words = `${plural(result.recordings.length, "recording is", "recordings are")} on the shelf now.`;
      if (result.refused?.length) {
        say(says, `${words} Not taken: ${result.refused.map((file) => `${file.name} (${file.reason})`).join(", ")}.`, true);
      } else {
        say(says, words);
        setTimeout(() => location.assign(form.dataset.next), 1200);
      }
    } catch (error) {
      say(says, error.message, true);
    }
    button.disabled = false;
  }

  form.addEventListener("submit", (event) => {
    event.preventDefault();
    send(input.files);
  });
  form.addEventListener("dragover", (event) => {
    event.preventDefault();
    form.classList.add("is-over");
  });
  form.addEventListener("dragleave", () => form.classList.remove("is-over"));
  form.addEventListener("drop", (event) => {
    event.preventDefault();
    form.classList.remove("is-over");
    send(event.dataTransfer.files);
  });
}
