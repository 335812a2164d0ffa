// live follows a run. The event stream only says that something happened; what the page shows is fetched as
// the server renders it, and the regions marked data-live are exchanged. So there is one template for both.
import { say } from "../../dom.js";

const PAUSE = 1000; // ms between two looks, however fast the events come
const RETRY = 5000; // ms until a refused stream is asked for again

export function mount(root) {
  const says = document.getElementById(root.dataset.says);
  let due = false;
  let busy = false;
  let over = false;

  async function look() {
    if (busy) return;
    busy = true;
    while (due) {
      due = false;
      try {
        await refresh();
        if (says.classList.contains("wrong")) say(says, "");
      } catch {
        say(says, "The latest could not be fetched; trying again.", true);
        due = !over;
      }
      await new Promise((done) => setTimeout(done, PAUSE));
    }
    busy = false;
  }

  // A lost connection is taken up again by the browser; an answer that is no stream ends its trying, and then
  // it is up to us.
  let stream;
  function follow() {
    stream = new EventSource(root.dataset.events);
    stream.addEventListener("job", happened);
    stream.addEventListener("run", happened);
    stream.addEventListener("end", ended);
    stream.addEventListener("open", () => say(says, ""));
    stream.addEventListener("error", lost);
  }
  const happened = () => {
    due = true;
    look();
  };
  async function ended() {
    over = true;
    stream.close();
    await refresh().catch(() => {});
    root.querySelector("[data-component='cancel']")?.remove();
    say(says, "The run has ended.");
  }
  function lost() {
    if (over) return;
    say(says, "The connection was lost; trying again.", true);
    if (stream.readyState === EventSource.CLOSED) setTimeout(follow, RETRY);
  }
  follow();
}

async function refresh() {
  const reply = await fetch(location.href, { headers: { Accept: "text/html" } });
  if (!reply.ok) throw new Error(reply.statusText);
  const fresh = new DOMParser().parseFromString(await reply.text(), "text/html");
  for (const region of document.querySelectorAll("[data-live]")) {
    const next = fresh.getElementById(region.id);
    if (next && !region.isEqualNode(next)) exchange(region, document.importNode(next, true));
  }
}

// exchange keeps the keyboard where it was: on the link with the same address.
function exchange(region, next) {
  const href = region.contains(document.activeElement) ? document.activeElement.getAttribute("href") : null;
  region.replaceWith(next);
  if (href) next.querySelector(`a[href="${CSS.escape(href)}"]`)?.focus({ preventScroll: true });
}
