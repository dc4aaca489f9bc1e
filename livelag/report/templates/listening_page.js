"use strict";
(() => {
  const byId = (id) => document.getElementById(id);
  const calm = window.matchMedia("(prefers-reduced-motion: reduce)");
  const sounds = [...document.querySelectorAll("article.sound")].map((article, index) => ({
    index,
    article,
    audio: article.querySelector("audio"),
    drawing: article.querySelector("svg.curve"),
    place: article.querySelector("g.place"),
    diamond: article.querySelector("g.place .place-mark"),
    line: [...article.querySelector("polyline.glide-line").points],
    badge: article.querySelector(".playing"),
    name: article.dataset.name,
  }));
  let current = 0;
  let before = null;

  const isPlaying = (sound) => !sound.audio.paused && !sound.audio.ended;
  const playing = () => sounds.find(isPlaying);

  // Where a sound is, drawn on its curve.
  function heightAt(line, x) {
    let low = 0;
    let high = line.length - 1;
    while (high - low > 1) {
      const middle = (low + high) >> 1;
      if (line[middle].x <= x) low = middle;
      else high = middle;
    }
    const [a, b] = [line[low], line[high]];
    const part = b.x > a.x ? Math.min(1, Math.max(0, (x - a.x) / (b.x - a.x))) : 1;
    return a.y + part * (b.y - a.y);
  }

  function showPlace(sound) {
    const length = sound.audio.duration;
    if (!Number.isFinite(length) || length <= 0) return;
    const first = sound.line[0].x;
    const last = sound.line[sound.line.length - 1].x;
    const x = first + (last - first) * Math.min(1, sound.audio.currentTime / length);
    sound.place.setAttribute("transform", `translate(${x.toFixed(2)} 0)`);
    sound.diamond.setAttribute(
      "transform", `translate(0 ${heightAt(sound.line, x).toFixed(2)})`);
    sound.place.removeAttribute("display");
  }

  function follow() {
    const sound = playing();
    if (!sound || calm.matches) return;
    showPlace(sound);
    requestAnimationFrame(follow);
  }

  function tell() {
    const sound = playing();
    for (const each of sounds) {
      each.article.classList.toggle("sounding", each === sound);
      each.badge.textContent = each === sound ? "▶ plays" : "";
    }
    const words = sound ? `${sound.name} plays.` : "Nothing plays.";
    if (byId("now").textContent !== words) byId("now").textContent = words;
  }

  function makeCurrent(index) {
    if (index === current) return;
    before = current;
    current = index;
  }

  // One sound at a time, all at one volume.
  for (const sound of sounds) {
    sound.audio.volume = 0.3;
    sound.audio.addEventListener("play", () => {
      // It may have been stopped again before this event came.
      if (!isPlaying(sound)) return;
      for (const other of sounds) if (other !== sound) other.audio.pause();
      makeCurrent(sound.index);
      tell();
      requestAnimationFrame(follow);
    });
    sound.audio.addEventListener("pause", tell);
    sound.audio.addEventListener("ended", tell);
    sound.audio.addEventListener("timeupdate", () => showPlace(sound));
    sound.audio.addEventListener("seeked", () => showPlace(sound));
    sound.audio.addEventListener("volumechange", () => {
      for (const other of sounds) {
        if (other.audio.volume !== sound.audio.volume) other.audio.volume = sound.audio.volume;
        if (other.audio.muted !== sound.audio.muted) other.audio.muted = sound.audio.muted;
      }
    });
    sound.article.addEventListener("focusin", () => {
      if (!playing()) makeCurrent(sound.index);
    });
    sound.drawing.addEventListener("click", (event) => {
      const field = sound.drawing.querySelector(".edge").getBoundingClientRect();
      const part = (event.clientX - field.left) / field.width;
      if (part < 0 || part > 1 || !Number.isFinite(sound.audio.duration)) return;
      sound.audio.currentTime = part * sound.audio.duration;
    });
  }

  function play(sound) {
    sound.audio.play().catch((error) => {
      if (error.name !== "AbortError") byId("now").textContent = `${sound.name} cannot be played.`;
    });
  }

  function silence() {
    for (const sound of sounds) sound.audio.pause();
  }

  function goTo(index, andPlay) {
    const from = playing();
    const sound = sounds[index];
    if (from && from !== sound) {
      const keep = byId("keep-place").checked;
      const end = Number.isFinite(sound.audio.duration) ? sound.audio.duration : Infinity;
      from.audio.pause();
      sound.audio.currentTime = keep ? Math.min(from.audio.currentTime, end) : 0;
    }
    makeCurrent(index);
    sound.article.focus({ preventScroll: true });
    sound.article.scrollIntoView({ block: "nearest" });
    if (from || andPlay) play(sound);
  }

  const deeds = {
    " ": () => (isPlaying(sounds[current]) ? silence() : play(sounds[current])),
    n: () => goTo((current + 1) % sounds.length, false),
    p: () => goTo((current + sounds.length - 1) % sounds.length, false),
    b: () => before !== null && goTo(before, true),
    0: () => {
      sounds[current].audio.currentTime = 0;
    },
  };

  document.addEventListener("keydown", (event) => {
    if (event.defaultPrevented || event.isComposing) return;
    if (event.ctrlKey || event.altKey || event.metaKey) return;
    if (event.key === "Escape") {
      silence();
      return;
    }
    const on = event.target instanceof Element ? event.target : document.body;
    if (!byId("use-keys").checked || event.repeat) return;
    if (on.closest("input[type=text], textarea")) return;
    // Space belongs to whatever control has the focus.
    const control = "audio, input, button, summary, a, [role=region]";
    const key = event.key.toLowerCase();
    if (key === " " && on.closest(control)) return;
    const number = /^[1-9]$/.test(key) ? Number(key) - 1 : -1;
    if (number >= 0 && number < sounds.length) {
      if (isPlaying(sounds[number])) silence();
      else goTo(number, true);
    } else if (Object.hasOwn(deeds, key) && (sounds.length > 1 || " 0".includes(key))) {
      deeds[key]();
    } else {
      return;
    }
    event.preventDefault();
  });

  // The choice as text.
  function compose() {
    const { title, tune } = byId("note").dataset;
    const lines = [`Listening page: ${title}`, `Tune: ${tune}`];
    const chosen = document.querySelector("input[name=choice]:checked");
    if (sounds.length > 1) {
      const words = chosen && sounds[chosen.value - 1].article.dataset.words;
      lines.push(chosen ? `My choice: sound ${chosen.value}: ${words}` : "My choice: none yet");
    }
    for (const sound of sounds) {
      const remark = byId(`remark-${sound.index + 1}`).value.trim();
      if (remark) lines.push(`On sound ${sound.index + 1}: ${remark}`);
    }
    byId("note").value = lines.join("\n");
    byId("copied").textContent = "";
  }

  async function copy() {
    const note = byId("note");
    note.focus();
    note.select();
    let done = false;
    try {
      await navigator.clipboard.writeText(note.value);
      done = true;
    } catch {
      done = document.execCommand("copy");
    }
    byId("copied").textContent = done ? "Copied." : "Selected: copy it with your usual keys.";
  }

  document.addEventListener("input", compose);
  byId("copy").addEventListener("click", copy);
  compose();
  for (const part of document.querySelectorAll(".scripted")) part.hidden = false;
  document.querySelector(".unscripted").hidden = true;
})();
