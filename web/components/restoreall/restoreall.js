import { get, post } from "../../api.js";
import { el, parts, say } from "../../dom.js";
import { count, plural } from "../../figures.js";

const NAMED = 20; // that could not be brought back; more would say no more

// One after another, each whole or not at all: leaving the page leaves the rest in the attic.
export function mount(button) {
  const dialog = document.getElementById(button.dataset.dialog);
  const form = dialog.querySelector("form");
  const part = parts(dialog);
  const says = form.querySelector(".says");
  const go = form.querySelector("button[type=submit]");
  let stop = false;
  let back = 0;
  button.disabled = false;
  function clear() {
    say(says, "");
    part.failed.replaceChildren();
    part.failed.hidden = true;
    stop = false;
  }
  button.addEventListener("click", () => {
    clear();
    dialog.showModal();
  });
  part.close.addEventListener("click", () => dialog.close());
  dialog.addEventListener("close", () => {
    stop = true;
    if (back) location.reload();
  });
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    clear();
    go.disabled = true;
    part.close.textContent = "Stop here";
    const failed = [];
    try {
      for await (const original of originals(form.dataset)) {
        if (stop) break;
        try {
          await post(`/api/v1/recordings/${original.recording_id}/restore`);
          back++;
          say(says, `${plural(back, "original is", "originals are")} back …`);
        } catch (error) {
          failed.push(original);
          part.failed.hidden = false;
          if (failed.length <= NAMED) part.failed.append(el("li", {}, el("bdi", {}, original.path), `: ${error.message}`));
        }
      }
      say(says, ended(back, failed.length), failed.length > 0);
    } catch (error) {
      say(says, error.message, true);
    }
    part.close.textContent = "Close";
    if (back && !failed.length) setTimeout(() => dialog.close(), 1200);
    go.disabled = false;
  });
}

export function ended(back, failed) {
  const words = `${plural(back, "original is", "originals are")} back in place.`;
  return failed ? `${words} ${count(failed)} could not be brought back.` : words;
}

// originals are all that the attic has for that, page by page; each page is asked for when it is needed.
async function* originals({ of, id }) {
  for (let after = 0; ;) {
    const { originals: page } = await get(`/api/v1/attic?${of}=${id}&after=${after}&limit=1000`);
    if (!page.length) return;
    yield* page;
    after = page.at(-1).recording_id;
  }
}
