import { get, post } from "../../api.js";
import { el, parts, say } from "../../dom.js";

// The profile offered first: what a shelf of everything is levelled with.
const usual = "rotation";
// The one that is named where nothing is levelled.
const plain = "untouched";

export function mount(button) {
  const dialog = document.getElementById(button.dataset.dialog);
  const form = dialog.querySelector("form");
  const part = parts(dialog);
  const says = form.querySelector(".says");
  const start = form.querySelector("button[type=submit]");

  let known = []; // profiles

  async function offer() {
    start.disabled = true;
    known = [];
    how();
    try {
      const { profiles, problems } = await get(form.dataset.profiles);
      const first = profiles.find(({ name }) => name === usual) ?? profiles[0];
      known = [first, ...profiles.filter((p) => p !== first)];
      part.profiles.replaceChildren(...known.map(option));
      const trouble = unusable(problems);
      part.problems.hidden = !trouble;
      part.problems.textContent = trouble;
      how();
      start.disabled = false;
    } catch (error) {
      const again = el("button", { type: "button" }, "Try again");
      again.addEventListener("click", offer);
      part.profiles.replaceChildren(el("p", { class: "says wrong" }, error.message), again);
    }
  }

  // What does not level needs of a profile only how it counts a single channel; that is asked if there is a choice.
  const chosen = () => form.elements.delivery.value;
  const levels = () => chosen() === "copy" || chosen() === "replace";
  function how() {
    part.how.hidden = !levels() && known.length > 0; // while they are fetched, or cannot be, that is to be seen
    part.single.hidden = levels() || new Set(known.map(({ mono }) => mono)).size < 2;
  }

  // What changes the shelf takes a second step, anew each time.
  const { sure, group } = form.elements;
  function ask() {
    const writes = chosen() === "replace" || chosen() === "tags";
    how();
    part.sure.hidden = !writes;
    part.yes.textContent = chosen() === "tags" ? "Yes, write into the files on this shelf" : "Yes, replace the files on this shelf";
    sure.required = writes;
    sure.checked = false;
    part.group.hidden = chosen() === "measure";
    group.querySelector("[data-levels]").hidden = !levels();
    group.value = levels() ? "" : "none";
    part.shares.textContent = levels() ? "Those share one gain, which does not go with a ride." : "Those get a gain of their album too.";
    part.file.hidden = !levels();
    part.inplace.hidden = chosen() !== "replace";
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
        profile: levels() ? form.elements.profile.value : counting(known, form.elements.mono.value),
        delivery: chosen(),
        ...wishes(form.elements, levels(), chosen() === "tags"),
      });
      location.assign(`/runs/${run.id}`);
    } catch (error) {
      say(says, error.message, true);
      start.disabled = false;
    }
  });
}

// counting names a profile that counts a single channel by a rule: the plainest if it does.
export function counting(profiles, mono) {
  const fits = profiles.filter((p) => p.mono === mono);
  return (fits.find(({ name }) => name === plain) ?? fits[0] ?? profiles[0])?.name;
}

// wishes are what a run asks for beside its profile; what is not shown is not asked for.
export function wishes({ format, rate, group }, levels, tags) {
  if (tags) return { group: group.value };
  return levels ? { format: format.value, bit_rate_kbps: Number(rate.value), group: group.value } : {};
}

const NAMED = 5; // files that are named; more would cover the choice

// unusable says which files of the profiles folder are not among the profiles; "" if all are. A file can have several
// things wrong with it, and the folder itself can be what cannot be read.
export function unusable(problems) {
  const files = [...new Set(problems.map(({ file }) => file))];
  if (!files.length) return "";
  if (!files[0].toLowerCase().endsWith(".toml")) return "The profiles folder cannot be read.";
  const names = files.slice(0, NAMED).join(", ") + (files.length > NAMED ? `, and ${files.length - NAMED} more` : "");
  return `${files.length === 1 ? "1 file" : `${files.length} files`} in the profiles folder cannot be used: ${names}.`;
}

// brief is the start of what a profile says it does: to what loudness, with what ride, under what ceiling; and that a
// folder shares one gain.
function brief({ words, group }) {
  const start = (title, most) => words.find((section) => section.title === title)?.words.slice(0, most) ?? [];
  return [...start("Loudness", group === "none" ? 2 : 3), ...start("Ride", 1), ...start("Peaks", 1)].join(" ");
}

// option is a line for a profile. What it does in detail is told once it is chosen.
function option(profile, index) {
  return el("label", { class: "option profile" },
    el("input", { type: "radio", name: "profile", value: profile.name, checked: index === 0 }),
    el("span", {},
      el("span", { class: "title" },
        el("span", {}, el("b", {}, profile.name), profile.source === "own" ? " (your own)" : null),
        el("small", {}, { folder: "One gain for a folder. ", album: "One gain for an album. " }[profile.group] ?? null, profile.summary)),
      el("small", { class: "more" }, brief(profile))));
}
