// The sound of a call: one element for each file, laid on the axis of the call. Files beside a page on disk may be
// played but not looked into, so that the plain elements have to do; where the browser permits, each voice goes to its
// own side.

const SYNC = 0.08;

class Player {
  constructor(view, root, tape) {
    this.view = view;
    this.tape = tape;
    this.slot = name => root.querySelector(`[data-slot="${name}"]`);
    this.version = "heard";
    this.side = "both";
    this.volume = 0.15;
    this.t = 0;
    this.playing = false;
    this.audible =
      audit.sound !== "nowhere" && view.streams.some(one => one.sound && Object.keys(one.sound.files).length);
    this.elements = new Map();
    this.end = tape.whole[1];
    this.fill(root);
  }

  fill(root) {
    const seek = this.slot("seek");
    seek.max = String(this.end);
    seek.addEventListener("input", () => this.seek(Number(seek.value)));
    if (!this.audible) {
      this.slot("sound-note").textContent = this.view.streams.some(one => one.sound)
        ? "This report holds no sound."
        : "This call has no sound that could be played.";
      this.slot("play").hidden = this.slot("choices").hidden = true;
    }
    this.slot("play").addEventListener("click", () => this.toggle());
    this.slot("volume").addEventListener("input", event => {
      this.volume = Number(event.target.value);
      for (const {element} of this.elements.values()) element.volume = this.volume;
    });
    for (const input of root.querySelectorAll("[name=version], [name=side]")) {
      // Names are those of one call at a time: radio buttons of an earlier one are gone.
      input.addEventListener("change", () => this.switchTo(input.name, input.value));
    }
    this.show();
  }

  switchTo(name, value) {
    this[name] = value;
    if (this.playing) {
      this.hush();
      this.sound();
    }
  }

  // The files that are heard now, each with its place on the axis.
  tracks() {
    const both = this.view.both;
    if (this.version === "heard" && this.side === "both" && both) {
      return [{name: both.file, begin: both.begin / 1000, pace: 1, end: this.end, pan: 0}];
    }
    return this.view.streams
      .filter(one => one.sound?.files[this.version] && (this.side === "both" || one.ear === this.side))
      .map(one => ({
        name: one.sound.files[this.version],
        begin: one.sound.begin / 1000,
        pace: one.sound.pace,
        end: one.sound.begin / 1000 + one.sound.duration_s / one.sound.pace,
        pan: this.side === "both" ? (one.ear === "callee" ? -1 : 1) : 0,
      }));
  }

  element(track) {
    if (!this.elements.has(track.name)) {
      const element = new Audio();
      element.preload = "auto";
      element.src = this.source(track.name);
      element.addEventListener("error", () => this.fail());
      this.elements.set(track.name, {element, panner: this.panner(element)});
    }
    const found = this.elements.get(track.name);
    found.element.volume = this.volume;
    if (found.panner) found.panner.pan.value = track.pan;
    return found.element;
  }

  source(name) {
    const inside = document.getElementById(`sound-${name}`);
    if (!inside) return `audio/${name}.wav`;
    const octets = Uint8Array.from(atob(inside.textContent.trim()), sign => sign.charCodeAt(0));
    return URL.createObjectURL(new Blob([octets], {type: "audio/flac"}));
  }

  panner(element) {
    if (audit.sound !== "inside" && !location.protocol.startsWith("http")) return null;
    this.context ??= new AudioContext();
    const panner = new StereoPannerNode(this.context);
    this.context.createMediaElementSource(element).connect(panner).connect(this.context.destination);
    return panner;
  }

  async toggle() {
    if (this.playing) this.pause();
    else if (this.audible && (await cautioned())) this.play();
  }

  play() {
    if (this.t >= this.end - 0.05) this.t = Math.max(0, this.tape.whole[0]);
    this.playing = true;
    this.clock = performance.now();
    this.sound();
    this.show();
    requestAnimationFrame(() => this.tick());
  }

  pause() {
    this.playing = false;
    this.hush();
    this.show();
  }

  hush() {
    for (const {element} of this.elements.values()) element.pause();
  }

  // Starts, stops and keeps together what is to be heard at this moment.
  sound() {
    this.context?.resume();
    for (const track of this.tracks()) {
      const due = (this.t - track.begin) * track.pace;
      const inside = due >= 0 && this.t < track.end;
      if (!inside) {
        this.elements.get(track.name)?.element.pause();
        continue;
      }
      const element = this.element(track);
      if (element.ended) continue;
      if (element.paused || Math.abs(element.currentTime - due) > SYNC) element.currentTime = due;
      if (element.paused) element.play().catch(() => {});
    }
  }

  tick() {
    if (!this.playing) return;
    const now = performance.now(),
      passed = (now - this.clock) / 1000;
    this.clock = now;
    // The sound leads; where there is none, time goes on by itself.
    const leading = this.tracks()
      .map(track => ({track, element: this.elements.get(track.name)?.element}))
      .find(({element}) => element && !element.paused && element.readyState > 2 && !element.seeking);
    this.t = leading
      ? leading.track.begin + leading.element.currentTime / leading.track.pace
      : this.t + this.waits(passed);
    if (this.t >= this.end) return this.pause();
    this.sound();
    this.show(true);
    requestAnimationFrame(() => this.tick());
  }

  // While a file is still being opened, time stands.
  waits(passed) {
    const opening = this.tracks().some(track => {
      const element = this.elements.get(track.name)?.element;
      return (
        element &&
        !element.error &&
        !element.ended &&
        this.t >= track.begin &&
        this.t < track.end &&
        (element.readyState < 3 || element.seeking)
      );
    });
    return opening ? 0 : passed;
  }

  seek(t) {
    this.t = Math.max(this.tape.whole[0], Math.min(this.end, t));
    if (this.playing) {
      this.hush();
      this.sound();
    }
    this.show();
  }

  show(follow = false) {
    const play = this.slot("play");
    play.textContent = this.playing ? "Pause" : "Play";
    const seek = this.slot("seek");
    seek.min = String(Math.min(0, this.tape.whole[0]));
    seek.value = String(this.t);
    const when = this.tape.picture.timeOfDay(this.t, 1);
    seek.setAttribute("aria-valuetext", `${when}, ${figure(this.t)} seconds into the call`);
    this.slot("place").textContent = `${when}  ${span(this.t, 1)} of ${span(this.end)}`;
    this.tape.cursor(this.t, follow);
  }

  fail() {
    this.pause();
    this.slot("sound-note").textContent = "A sound file cannot be played: is the folder audio still beside this page?";
  }

  close() {
    this.pause();
    for (const {element} of this.elements.values()) {
      if (element.src.startsWith("blob:")) URL.revokeObjectURL(element.src);
      element.removeAttribute("src");
    }
    this.context?.close();
  }
}

// Before the first sound of a visit the caution is read, or at least shown.
let agreed = false;

function cautioned() {
  if (agreed) return true;
  const dialog = document.getElementById("caution");
  dialog.showModal();
  return new Promise(done =>
    dialog.addEventListener(
      "close",
      () => {
        agreed = dialog.returnValue === "play";
        dialog.returnValue = "";
        done(agreed);
      },
      {once: true},
    ),
  );
}
