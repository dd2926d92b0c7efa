// The tape: the picture of both ears, and over it all that moves: cursor, flags of findings, values under the pointer.

const FLAG_ROOM = 25;

class Tape {
  constructor(view, root, seek) {
    this.view = view;
    this.root = root;
    this.seek = seek;
    this.slot = name => root.querySelector(`[data-slot="${name}"]`);
    this.stage = this.slot("stage");
    this.picture = new Picture(view, () => this.frame().width);
    this.lanes = this.picture.lanes;
    this.whole = this.picture.whole;
    this.selected = null;
    this.t = 0;
    this.range = {start: this.whole[0], end: this.whole[1]};
    this.flags();
    this.legend();
    this.listen();
  }

  build() {
    const {start, end} = this.range;
    this.range = new Bokeh.Range1d({start, end, bounds: this.whole, min_interval: SHORTEST});
    this.range.change.connect(() => this.place());
    this.figure = this.picture.figure(this.range);
    this.mark = new Bokeh.BoxAnnotation({
      left: 0,
      right: 0,
      visible: false,
      fill_color: colour("accent"),
      fill_alpha: 0.16,
      line_color: colour("accent"),
      line_alpha: 0.8,
      level: "underlay",
      propagate_hover: true,
    });
    this.figure.add_layout(this.mark);
    if (matchMedia("(pointer: fine)").matches) this.tools();
  }

  // A finger scrolls the page; a mouse moves the picture.
  tools() {
    const wheel = new Bokeh.WheelZoomTool({dimensions: "width", modifiers: {ctrl: true}});
    const pan = new Bokeh.PanTool({dimensions: "width"});
    this.figure.add_tools(wheel, pan);
    this.figure.toolbar.active_scroll = wheel;
    this.figure.toolbar.active_drag = pan;
  }

  async show() {
    this.drawn = await showFigure(this.figure, this.slot("figure"));
    this.labels();
    this.watch?.disconnect();
    this.watch = new ResizeObserver(() => this.place());
    this.watch.observe(this.stage);
    this.place();
  }

  // Colours are those of the day or the night: the figure is made anew when they change.
  async redraw() {
    this.build();
    this.select(this.selected, false);
    await this.show();
  }

  // Names of the lanes beside them.
  labels() {
    const terms = audit.notes.terms;
    const gutter = this.slot("gutter");
    gutter.replaceChildren();
    const write = (side, y, text, kind = "") =>
      gutter.append(
        make(
          "span",
          {class: `lane ${kind}`, style: {top: `${OUTER + 1 - side * y}px`}, title: terms[text] || ""},
          text,
        ),
      );
    for (const side of Object.values(SIDES)) {
      write(side, DELAY + LANES.delay, figure(this.picture.scale), "tick");
      write(side, DELAY + LANES.delay / 2, `${figure(this.picture.scale / 2)} ms`, "tick");
      write(side, DELAY, "0", "tick");
      write(side, RIBBON + LANES.ribbon / 2, "rating");
      write(side, LOST + LANES.lost / 2, "lost");
      write(side, WAVE + LANES.wave / 2, "sound");
    }
  }

  legend() {
    const speech = this.lanes.some(lane => lane.speech.length),
      late = this.lanes.some(lane => lane.late.length),
      lost = this.lanes.some(lane => lane.gaps.length);
    const entry = (kind, words, text) =>
      make("li", {}, make("span", {class: `key ${kind}`, "aria-hidden": "true"}), text ? term(words, text) : words);
    const terms = audit.notes.terms;
    this.slot("legend").replaceChildren(
      entry("key-dot", "delay of a packet", terms.delay),
      entry("key-deadline", "playout deadline", terms["playout deadline"]),
      ...(late ? [entry("key-late", "too late, discarded", terms["playout deadline"])] : []),
      ...(lost ? [entry("key-lost", "lost", terms.lost)] : []),
      ...(speech ? [entry("key-speech", "speech", terms.sound)] : []),
      ...(this.picture.events.length ? [make("li", {}, make("b", {"aria-hidden": "true"}, "5 "), "key pressed")] : []),
      ...(this.view.holds.length ? [entry("key-hold", "on hold")] : []),
      ...(this.view.messages.rows.length ? [entry("key-message", "signalling message")] : []),
      make(
        "li",
        {class: "scale"},
        term("rating", terms.rating),
        ...BANDS.map(([, name], level) =>
          make(
            "span",
            {class: "scale-step"},
            make("span", {class: `key key-band band-${level}`, "aria-hidden": "true"}),
            name,
          ),
        ),
      ),
    );
  }

  // Numbered flags on the axis: buttons, so that the keyboard reaches them.
  flags() {
    this.pins = this.view.findings.map((finding, k) => {
      const lane = this.lanes.find(one => one.id === finding.stream);
      const ear = lane?.ear || "caller";
      // What has no place of its own holds for its stream, or else for the call.
      const from = known(finding.from_s) ? finding.from_s : lane?.begin,
        to = known(finding.from_s) ? finding.to_s : lane?.end;
      const button = make(
        "button",
        {
          type: "button",
          class: `flag flag-${ear}`,
          "aria-label": `Finding ${k + 1}: ${inWords(finding.finding)}`,
          onclick: () => this.choose(k),
        },
        String(k + 1),
      );
      return {button, ear, ofOne: Boolean(lane), from, to: Math.max(known(to) ? to : from, from + 0.02), t: from ?? 0};
    });
    this.slot("flags").replaceChildren(...this.pins.map(pin => pin.button));
  }

  choose(k) {
    this.onchoose?.(k);
    this.select(k);
  }

  // Marks a finding and moves the axes to its place.
  select(k, move = true) {
    this.selected = k;
    this.pins.forEach((pin, place) => pin.button.setAttribute("aria-pressed", String(place === k)));
    const pin = this.pins[k];
    if (!this.mark) return;
    this.mark.visible = known(pin?.from);
    if (!this.mark.visible) {
      if (pin && move) this.look(...this.whole);
      return;
    }
    this.mark.left = pin.from;
    this.mark.right = pin.to;
    this.mark.bottom = pin.ofOne && pin.ear === "caller" ? -LINE : -OUTER;
    this.mark.top = pin.ofOne && pin.ear === "callee" ? LINE : OUTER;
    if (move) {
      const margin = Math.max(1.5, (pin.to - pin.from) * 0.35);
      this.look(pin.from - margin, pin.to + margin);
    }
  }

  // Shows a stretch of the call, as far as there is one.
  look(from, to) {
    const [begin, end] = this.whole;
    const length = Math.max(SHORTEST, Math.min(to - from, end - begin));
    const start = Math.max(begin, Math.min(from, end - length));
    this.range.setv({start, end: start + length});
  }

  move(how) {
    const {start, end} = this.range,
      length = end - start,
      middle = this.t > start && this.t < end ? this.t : (start + end) / 2;
    const share = (middle - start) / length;
    if (how === "all") this.look(...this.whole);
    else if (how === "in") this.look(middle - (length / 2) * share, middle + (length / 2) * (1 - share));
    else if (how === "out") this.look(middle - length * 2 * share, middle + length * 2 * (1 - share));
    else this.look(start + (how === "later" ? 0.5 : -0.5) * length, end + (how === "later" ? 0.5 : -0.5) * length);
  }

  listen() {
    let down = null;
    this.stage.addEventListener("pointerdown", event => {
      down = [event.clientX, event.clientY];
    });
    this.stage.addEventListener("click", event => {
      const still = down && Math.hypot(event.clientX - down[0], event.clientY - down[1]) < 5;
      if (!event.target.closest("button") && (still || !down)) this.seek(this.timeAt(event.clientX));
    });
    this.stage.addEventListener("pointermove", event => this.hover(event));
    this.stage.addEventListener("pointerleave", () => this.rest());
    this.stage.addEventListener("keydown", event => this.key(event));
    for (const button of this.root.querySelectorAll("[data-move]")) {
      button.addEventListener("click", () => this.move(button.dataset.move));
    }
    this.rest();
  }

  key(event) {
    const length = this.range.end - this.range.start;
    const actions = {
      ArrowRight: () => this.step_by(length / (event.shiftKey ? 10 : 100)),
      ArrowLeft: () => this.step_by(-length / (event.shiftKey ? 10 : 100)),
      "+": () => this.move("in"),
      "=": () => this.move("in"),
      "-": () => this.move("out"),
      0: () => this.move("all"),
      Home: () => this.seek(0),
      End: () => this.seek(this.whole[1]),
      " ": () => this.onplay?.(),
    };
    if (!(event.key in actions) || event.ctrlKey || event.metaKey || event.target !== this.stage) return;
    event.preventDefault();
    actions[event.key]();
  }

  step_by(seconds) {
    const t = Math.max(this.whole[0], Math.min(this.whole[1], this.t + seconds));
    this.seek(t);
    this.read(t);
    this.slot("spoken").textContent =
      `${this.picture.timeOfDay(t, 1)}. Caller hears: ${this.values("caller", t)}. ` +
      `Callee hears: ${this.values("callee", t)}.`;
  }

  frame() {
    const box = this.drawn?.frame.bbox;
    return box ? {left: box.left, width: box.width} : {left: GUTTER, width: this.stage.clientWidth - GUTTER - 8};
  }

  timeAt(clientX) {
    const {left, width} = this.frame();
    const share = (clientX - this.stage.getBoundingClientRect().left - left) / width;
    return Math.max(
      this.range.start,
      Math.min(this.range.end, this.range.start + share * (this.range.end - this.range.start)),
    );
  }

  x(t) {
    const {left, width} = this.frame();
    return left + ((t - this.range.start) / (this.range.end - this.range.start)) * width;
  }

  // Puts everything that lies over the figure where the range has moved it.
  place() {
    const {left, width} = this.frame();
    for (const ear of Object.keys(SIDES)) {
      const pins = this.pins.filter(pin => pin.ear === ear).sort((a, b) => a.t - b.t);
      for (const pin of pins) {
        pin.x = this.x(pin.t);
        pin.button.hidden = pin.x < left - 12 || pin.x > left + width + 12;
      }
      spread(
        pins.filter(pin => !pin.button.hidden),
        left + width - 4,
      );
    }
    const {start, end} = this.range;
    this.picture.fitRatings((width * WINDOW) / (end - start));
    this.slot("shown").textContent =
      end - start > (this.whole[1] - this.whole[0]) * 0.999
        ? `${this.picture.timeOfDay(0)} to ${this.picture.timeOfDay(this.whole[1])}, ${this.view.zone}`
        : `${this.picture.timeOfDay(start, 1)} to ${this.picture.timeOfDay(end, 1)}, ${figure(end - start)} s of it`;
    this.cursor(this.t);
  }

  cursor(t, follow = false) {
    this.t = t;
    if (follow && t > this.range.end)
      this.look(t - (this.range.end - this.range.start) * 0.05, t + (this.range.end - this.range.start) * 0.95);
    const cursor = this.slot("cursor");
    cursor.hidden = t < this.range.start || t > this.range.end;
    cursor.style.transform = `translateX(${this.x(t)}px)`;
  }

  hover(event) {
    const t = this.timeAt(event.clientX);
    const hair = this.slot("hair"),
      moment = this.slot("moment");
    hair.hidden = moment.hidden = false;
    hair.style.transform = `translateX(${this.x(t)}px)`;
    moment.textContent = this.picture.timeOfDay(t, 2);
    moment.style.transform = `translateX(calc(${this.x(t)}px - 50%))`;
    this.read(t);
  }

  read(t) {
    for (const ear of Object.keys(SIDES)) this.slot(`readout-${ear}`).textContent = this.values(ear, t);
  }

  rest() {
    this.slot("hair").hidden = this.slot("moment").hidden = true;
    this.slot("readout-caller").textContent = this.lanes.length ? "Point at the picture to read its values" : "";
    this.slot("readout-callee").textContent = "";
  }

  // What one ear got at a moment, in words.
  values(ear, t) {
    const told = [];
    for (const lane of this.lanes.filter(one => one.ear === ear && t >= one.begin - 0.001 && t <= one.end + WINDOW)) {
      const k = Math.floor((t - lane.begin) / WINDOW),
        windows = lane.windows;
      if (k >= 0 && k < windows.count) {
        const lost = windows.lost?.[k] || 0,
          late = windows.late?.[k] || 0;
        told.push(
          known(windows.r?.[k]) ? `R ${figure(windows.r[k])} ${bandName(windows.r[k])}` : "not rated",
          `${lost} lost and ${late} too late of ${windows.expected?.[k] || 0} in 2 s`,
        );
        if (known(windows.jitter?.[k])) told.push(`jitter ${figure(windows.jitter[k])} ms`);
        if (known(windows.level?.[k])) told.push(`level ${figure(windows.level[k])} dBov`);
      }
      const near = nearest(lane.times, t),
        delay = lane.delays[near];
      if (known(delay)) told.push(`delay +${figure(delay)} ms`);
      const step = lastBefore(lane.deadline, t);
      if (step) told.push(`deadline +${figure(step.delay)} ms`);
      const gap = lane.gaps.find(one => t >= one.t - 0.01 && t <= one.t + Math.max(one.length, 0.02));
      if (gap) told.push(`${many(gap.packets, "packet")} missing here`);
    }
    return told.join(" · ") || "nothing";
  }
}

// Flags of one place stand side by side, and none beyond the edge.
function spread(pins, edge) {
  let free = -Infinity;
  for (const pin of pins) free = (pin.x = Math.max(pin.x, free)) + FLAG_ROOM;
  let limit = edge;
  for (const pin of [...pins].reverse()) limit = (pin.x = Math.min(pin.x, limit)) - FLAG_ROOM;
  for (const pin of pins) pin.button.style.left = `${pin.x}px`;
}

function nearest(sorted, t) {
  let low = 0,
    high = sorted.length - 1;
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (sorted[middle] < t) low = middle;
    else high = middle;
  }
  return Math.abs(sorted[low] - t) <= Math.abs(sorted[high] - t) ? low : high;
}

function lastBefore(steps, t) {
  let found = steps[0];
  for (const one of steps) {
    if (one.t > t) break;
    found = one;
  }
  return found;
}
