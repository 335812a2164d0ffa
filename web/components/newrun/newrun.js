import { get, post } from "../../api.js";
import { el, parts, say } from "../../dom.js";

// The profile offered first: what a shelf of everything is levelled with.
const usual = "rotation";

export function mount(button) {
  const dialog = document.getElementById(button.dataset.dialog);
  const form = dialog.querySelector("form");
  const part = parts(dialog);
  const says = form.querySelector(".says");
  const start = form.querySelector("button[type=submit]");

  let alike = true; // all profiles count a single channel by one rule

  async function offer() {
    start.disabled = true;
    try {
      const { profiles } = await get(form.dataset.profiles);
      part.profiles.replaceChildren(...profiles.map(option));
      alike = new Set(profiles.map(({ mono }) => mono)).size < 2;
      how();
      start.disabled = false;
    } catch (error) {
      const again = el("button", { type: "button" }, "Try again");
      again.addEventListener("click", offer);
      part.profiles.replaceChildren(el("p", { class: "says wrong" }, error.message), again);
    }
  }

  // Measuring needs no profile to choose, unless they count a single channel differently.
  function how() {
    part.how.hidden = alike && form.elements.delivery.value === "measure";
  }

  // Replacing is the one delivery that changes the shelf: it takes a second step, anew each time.
  const { sure } = form.elements;
  function ask() {
    const replaces = form.elements.delivery.value === "replace";
    how();
    part.sure.hidden = !replaces;
    sure.required = replaces;
    sure.checked = false;
  }
  for (const choice of form.elements.delivery) choice.addEventListener("change", ask);

  button.disabled = false;
  button.addEventListener("click", () => {
    say(says, "");
    ask();
    dialog.showModal();
    offer();
  });
  part.close.addEventListener("click", () => dialog.close());
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    start.disabled = true;
    try {
      const run = await post(form.dataset.url, {
        shelf_id: Number(form.dataset.shelf),
        folder: form.elements.folder.value.trim(),
        profile: form.elements.profile.value,
        delivery: form.elements.delivery.value,
      });
      location.assign(`/runs/${run.id}`);
    } catch (error) {
      say(says, error.message, true);
      start.disabled = false;
    }
  });
}

// brief is the start of what a profile says it does: to what loudness, with what ride, under what ceiling.
function brief({ words }) {
  const start = (title) => words.find((section) => section.title === title)?.words.slice(0, 2) ?? [];
  return ["Loudness", "Ride", "Peaks"].flatMap(start).join(" ");
}

function option(profile, index, all) {
  return el("label", { class: "option" },
    el("input", { type: "radio", name: "profile", value: profile.name, checked: index === Math.max(0, all.findIndex(({ name }) => name === usual)) }),
    el("span", {},
      el("b", {}, profile.name),
      profile.source === "own" ? " (your own)" : null,
      el("small", {}, profile.summary),
      el("small", {}, brief(profile))));
}
