// The audition player. Both versions run side by side and only one is heard, so that switching is instant and
// stays at the same moment. It starts at a fifth of full volume, and says why.
import { el, parts, say } from "../../dom.js";
import { clock } from "../../figures.js";

const DRIFT = 0.03; // s the two may come apart before the silent one is set right

export function mount(root) {
  const part = parts(root);
  const says = root.querySelector(".says");
  const stage = root.closest("figure");
  const buttons = [...root.querySelectorAll("[data-version]")];
  const lufs = { before: parseFloat(root.dataset.beforeLufs), after: parseFloat(root.dataset.afterLufs) };
  const quietest = Math.min(lufs.before, lufs.after);
  const sounds = Object.fromEntries(buttons.map((button) => [button.dataset.version, el("audio", { preload: "none", src: button.dataset.src })]));
  let heard = "before";

  // Each ear gets the slider's share; on request the louder version is turned down to the quieter one.
  function volumes() {
    const share = Number(part.volume.value) / 100;
    for (const [version, sound] of Object.entries(sounds)) {
      const down = part.match?.checked && Number.isFinite(quietest) ? 10 ** ((quietest - lufs[version]) / 20) : 1;
      sound.volume = share * down;
      sound.muted = version !== heard;
    }
    part.percent.textContent = `${part.volume.value} %`;
  }

  function hear(version) {
    if (!sounds[version] || version === heard) return;
    sounds[version].currentTime = sounds[heard].currentTime;
    heard = version;
    for (const button of buttons) button.setAttribute("aria-pressed", String(button.dataset.version === heard));
    volumes();
  }

  async function play() {
    try {
      await Promise.all(Object.values(sounds).map((sound) => sound.play()));
      say(says, "");
    } catch (error) {
      pause();
      if (error.name !== "AbortError") say(says, "This browser cannot play the recording, or the file is not there.", true);
    }
  }
  function pause() {
    for (const sound of Object.values(sounds)) sound.pause();
  }
  const toggle = () => (sounds[heard].paused ? play() : pause());

  function seek(seconds) {
    for (const sound of Object.values(sounds)) sound.currentTime = seconds;
    follow();
  }

  function follow() {
    const now = sounds[heard].currentTime;
    const whole = sounds[heard].duration;
    part.time.textContent = Number.isFinite(whole) ? `${clock(now)} of ${clock(whole)}` : clock(now);
    stage.dispatchEvent(new CustomEvent("playhead", { detail: now }));
    for (const [version, sound] of Object.entries(sounds)) {
      if (version !== heard && Math.abs(sound.currentTime - now) > DRIFT && !sound.seeking) sound.currentTime = now;
    }
  }

  function frame() {
    follow();
    if (!sounds[heard].paused) requestAnimationFrame(frame);
  }

  for (const sound of Object.values(sounds)) {
    sound.addEventListener("play", () => {
      part.play.textContent = "Pause";
      if (sound === sounds[heard]) requestAnimationFrame(frame);
    });
    sound.addEventListener("pause", () => {
      if (sound !== sounds[heard]) return;
      part.play.textContent = "Listen";
    });
    sound.addEventListener("error", () => {
      pause();
      say(says, "The sound could not be fetched.", true);
    });
  }
  part.play.addEventListener("click", toggle);
  for (const button of buttons) button.addEventListener("click", () => hear(button.dataset.version));
  part.volume.addEventListener("input", volumes);
  part.match?.addEventListener("change", volumes);
  stage.addEventListener("seek", (event) => seek(event.detail));
  stage.addEventListener("asked", () => { if (sounds[heard].currentTime) follow(); }); // by a chart that was drawn later
  for (const button of document.querySelectorAll("[data-seek]")) {
    button.disabled = false;
    button.addEventListener("click", () => {
      if (button.dataset.hear) hear(button.dataset.hear);
      seek(Math.max(Number(button.dataset.seek) - 1, 0)); // a second early: a fault needs its surroundings
      play();
    });
  }
  document.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey || event.target.closest("input, select, button, a, dialog")) return;
    const keys = { " ": toggle, b: () => hear("before"), a: () => hear("after") };
    if (!keys[event.key]) return;
    event.preventDefault();
    keys[event.key]();
  });
  volumes();
  const [, at] = location.hash.match(/^#at=(\d+(?:\.\d+)?)$/) ?? [];
  if (at) { // a list led here to listen to a moment of the copy
    hear("after");
    seek(Math.max(at - 1, 0));
  }
  part.row.hidden = false;
  part.why.hidden = false;
}
