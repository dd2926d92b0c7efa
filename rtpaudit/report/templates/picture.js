// The picture on the tape: both ears on one time line, drawn by the plotting library. All lanes share one figure, so
// that one range moves them together; y runs from the axis in the middle outwards, up for the caller's ear and down
// for the callee's.

const GUTTER = 62;
const LANES = {axis: 74, wave: 66, lost: 12, ribbon: 14, delay: 84, gap: 5};
const LINE = 12;
const INNER = LANES.axis / 2;
const WAVE = INNER + LANES.gap;
const LOST = WAVE + LANES.wave + LANES.gap;
const RIBBON = LOST + LANES.lost + 2;
const DELAY = RIBBON + LANES.ribbon + LANES.gap;
const OUTER = DELAY + LANES.delay;
const SIDES = {caller: 1, callee: -1};
const WINDOW = 2;
const SCALES = [20, 40, 60, 80, 100, 150, 200, 300, 400, 600, 800, 1000, 1500, 2000, 3000, 5000, 10000, 100000, 1e7];
const STEPS = [0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900, 1800, 3600, 7200];
const SHORTEST = 0.05;
const ROOM_FOR_FIGURE = 26;
const ROOM_FOR_WORDS = 118;
const MANY_WINDOWS = 150;

// Turns the short writing of a stream into arrays in seconds and milliseconds.
function unpack(stream) {
  let at = 0;
  const times = (stream.at || []).map(step => (at += step) / 1000);
  const lane = {
    id: stream.id,
    ear: stream.ear,
    begin: stream.begin / 1000,
    end: stream.end / 1000,
    windows: stream.windows,
    times,
    delays: (stream.delay || []).map(one => one / 10),
    late: (stream.late || []).map(([t, delay, over]) => ({t: t / 1000, delay: delay / 10, over: over / 10})),
    deadline: (stream.deadline || []).map(([t, delay]) => ({t: t / 1000, delay: delay / 10})),
    gaps: stream.gaps.map(([t, length, packets]) => ({t: t / 1000, length: length / 1000, packets})),
    speech: [],
    wave: null,
  };
  const sound = stream.sound;
  if (sound) {
    const octets = Uint8Array.from(atob(sound.envelope), sign => sign.charCodeAt(0));
    lane.wave = {values: new Int8Array(octets.buffer), begin: sound.begin / 1000, step: sound.step_s / sound.pace};
    lane.speech = sound.speech.map(one => one.map(t => sound.begin / 1000 + t / sound.pace));
  }
  return lane;
}

// The figure itself; what moves over it is the tape's.
class Picture {
  constructor(view, width) {
    this.view = view;
    this.width = width;
    this.lanes = view.streams.map(unpack);
    this.events = view.events.rows.map(row => ({...row, t: row.at / 1000}));
    this.whole = this.extent();
    this.scale = this.delayScale();
    this.loudness = this.waveScale();
  }

  extent() {
    const begins = [0],
      ends = [Math.max(0.2, (this.view.facts.ended - this.view.begin_ms) / 1000)];
    for (const lane of this.lanes) {
      begins.push(lane.begin);
      ends.push(lane.end, lane.wave ? lane.wave.begin + (lane.wave.values.length / 2) * lane.wave.step : 0);
    }
    for (const row of this.view.messages.rows) (begins.push(row.at / 1000), ends.push(row.at / 1000));
    const begin = Math.min(...begins),
      end = Math.max(...ends);
    const margin = (end - begin) * 0.008;
    return [begin - margin, end + margin];
  }

  // One scale of delay for both ears: room for the deadline and nearly all packets; what is beyond lies at the edge.
  delayScale() {
    const delays = this.lanes
      .flatMap(lane => [...lane.delays, ...lane.late.map(one => one.delay)])
      .sort((a, b) => a - b);
    const deadlines = this.lanes.flatMap(lane => lane.deadline.map(one => one.delay)).sort((a, b) => a - b);
    const most = delays.length ? delays[delays.length - 1] : 0;
    const nearlyAll = delays.length ? delays[Math.floor((delays.length - 1) * 0.995)] : 0;
    const deadline = deadlines.length ? deadlines[Math.floor((deadlines.length - 1) * 0.9)] : 0;
    const wanted = Math.min(Math.max(most, deadline) * 1.05, Math.max(nearlyAll * 1.1, deadline * 1.35));
    return SCALES.find(one => one >= wanted) || SCALES[SCALES.length - 1];
  }

  waveScale() {
    let most = 12;
    for (const lane of this.lanes)
      if (lane.wave) for (const one of lane.wave.values) most = Math.max(most, Math.abs(one));
    return most;
  }

  delayY(side, delay) {
    return side * (DELAY + Math.max(0, Math.min(1, delay / this.scale)) * LANES.delay);
  }

  figure(range) {
    const B = Bokeh;
    const figure = B.Plotting.figure({
      height: 2 * OUTER + 2,
      sizing_mode: "stretch_width",
      x_range: range,
      tools: "",
      toolbar_location: null,
      y_range: new B.Range1d({start: -OUTER - 1, end: OUTER + 1}),
      x_axis_type: null,
      y_axis_type: null,
      min_border: 0,
      min_border_left: GUTTER,
      min_border_right: 8,
      background_fill_color: null,
      border_fill_color: null,
      outline_line_color: null,
    });
    this.ratings = [];
    const ticker = this.ticker();
    figure.add_layout(new B.Grid({dimension: 0, ticker, grid_line_color: colour("line"), grid_line_width: 1}));
    for (const [ear, side] of Object.entries(SIDES)) {
      this.frames(figure, side);
      for (const lane of this.lanes.filter(one => one.ear === ear)) this.drawLane(figure, lane, side);
    }
    this.drawAxis(figure, ticker);
    return figure;
  }

  // Faint lines at zero delay and at the largest of the scale, and the room of the ribbon.
  frames(figure, side) {
    const [begin, end] = this.whole;
    for (const y of [DELAY, DELAY + LANES.delay / 2, DELAY + LANES.delay]) {
      draw(
        figure,
        "segment",
        {x0: [begin], x1: [end], y0: [side * y], y1: [side * y]},
        {line_color: colour("line"), line_width: 1},
      );
    }
    draw(
      figure,
      "segment",
      {x0: [begin], x1: [end], y0: [side * (WAVE + LANES.wave / 2)], y1: [side * (WAVE + LANES.wave / 2)]},
      {line_color: colour("line"), line_width: 1},
    );
  }

  drawLane(figure, lane, side) {
    const flat = {line_color: null};
    if (lane.speech.length) {
      draw(
        figure,
        "quad",
        {
          left: lane.speech.map(one => one[0]),
          right: lane.speech.map(one => one[1]),
          bottom: lane.speech.map(() => side * WAVE),
          top: lane.speech.map(() => side * (WAVE + LANES.wave)),
        },
        {fill_color: colour("speech"), ...flat},
      );
    }
    if (lane.wave) this.drawWave(figure, lane.wave, side);
    this.drawRibbon(figure, lane, side);
    if (lane.gaps.length) {
      draw(
        figure,
        "quad",
        {
          left: lane.gaps.map(one => one.t),
          right: lane.gaps.map(one => one.t + one.length),
          bottom: lane.gaps.map(() => side * LOST),
          top: lane.gaps.map(() => side * (LOST + LANES.lost)),
        },
        {fill_color: colour("ink"), line_color: colour("ink"), line_width: 1},
      );
    }
    this.drawArrivals(figure, lane, side);
  }

  drawWave(figure, wave, side) {
    const middle = side * (WAVE + LANES.wave / 2),
      half = LANES.wave / 2 - 1;
    const count = wave.values.length / 2,
      x = new Float64Array(count),
      low = new Float64Array(count),
      high = new Float64Array(count);
    for (let k = 0; k < count; k++) {
      x[k] = wave.begin + (k + 0.5) * wave.step;
      // Never thinner than a hair: silence is a line.
      low[k] = middle + (wave.values[2 * k] / this.loudness) * half - 0.4;
      high[k] = middle + (wave.values[2 * k + 1] / this.loudness) * half + 0.4;
    }
    draw(figure, "varea", {x, y1: low, y2: high}, {fill_color: colour("wave")});
  }

  // One cell for every two seconds; hatched where nothing is rated. A hatch for each cell would take long to draw.
  drawRibbon(figure, lane, side) {
    const cells = Array.from({length: lane.windows.count}, (_, k) => {
      const begin = lane.begin + k * WINDOW;
      return {
        left: begin,
        right: Math.max(begin, Math.min(begin + WINDOW, lane.end)),
        r: lane.windows.r?.[k],
        level: band(lane.windows.r?.[k]),
      };
    });
    const columns = kept => ({
      left: kept.map(one => one.left),
      right: kept.map(one => one.right),
      bottom: kept.map(() => side * RIBBON),
      top: kept.map(() => side * (RIBBON + LANES.ribbon)),
    });
    // The worse lies over the better, and in a long call is never thinner than a hair.
    const rated = cells.filter(one => one.level >= 0).sort((a, b) => a.level - b.level),
      other = cells.filter(one => one.level < 0);
    const fine = cells.length > MANY_WINDOWS;
    const shades = colours();
    draw(
      figure,
      "quad",
      {...columns(rated), fill: rated.map(one => shades[one.level])},
      {fill_color: {field: "fill"}, line_color: fine ? {field: "fill"} : colour("paper"), line_width: 1},
    );
    this.writeRatings(figure, rated, side);
    if (other.length) {
      draw(figure, "quad", columns(other), {
        fill_color: null,
        line_color: colour("line"),
        hatch_pattern: "/",
        hatch_color: colour("edge"),
        hatch_alpha: 0.4,
        hatch_scale: 6,
      });
    }
  }

  // The rating in figures, and in words, as soon as a cell has room for it.
  writeRatings(figure, cells, side) {
    const data = {
      x: cells.map(one => (one.left + one.right) / 2),
      y: cells.map(() => side * (RIBBON + LANES.ribbon / 2)),
      fill: cells.map(one => (one.level < dark() ? colour("ink") : colour("paper"))),
    };
    const style = {
      text_align: "center",
      text_baseline: "middle",
      text_font: colour("figures"),
      text_font_size: "10.5px",
      text_color: {field: "fill"},
      visible: false,
    };
    const short = {...data, text: cells.map(one => `${Math.round(one.r)}`)};
    const long = {...data, text: cells.map(one => `${Math.round(one.r)} ${bandName(one.r)}`)};
    this.ratings.push([draw(figure, "text", short, style), draw(figure, "text", long, style)]);
  }

  // Shows as much of the ratings as fits a cell of so many pixels.
  fitRatings(pixels) {
    for (const [short, long] of this.ratings) {
      short.visible = pixels >= ROOM_FOR_FIGURE && pixels < ROOM_FOR_WORDS;
      long.visible = pixels >= ROOM_FOR_WORDS;
    }
  }

  drawArrivals(figure, lane, side) {
    const inside = [],
      beyond = [];
    lane.times.forEach((t, k) => (lane.delays[k] <= this.scale ? inside : beyond).push(k));
    const points = kept => ({x: kept.map(k => lane.times[k]), y: kept.map(k => this.delayY(side, lane.delays[k]))});
    draw(figure, "scatter", points(inside), {
      marker: "circle",
      size: 3,
      fill_color: colour("dot"),
      line_color: null,
      fill_alpha: 0.75,
    });
    if (beyond.length) {
      draw(figure, "scatter", points(beyond), {
        marker: side > 0 ? "triangle" : "inverted_triangle",
        size: 6,
        line_color: colour("dot"),
        fill_color: null,
      });
    }
    if (lane.deadline.length) {
      const x = [],
        y = [];
      lane.deadline.forEach(({t, delay}, k) => {
        if (k) (x.push(t), y.push(y[y.length - 1]));
        (x.push(t), y.push(this.delayY(side, delay)));
      });
      draw(figure, "line", {x, y}, {line_color: colour("deadline"), line_width: 1.5, line_dash: [5, 3]});
    }
    if (lane.late.length) {
      draw(
        figure,
        "scatter",
        {x: lane.late.map(one => one.t), y: lane.late.map(one => this.delayY(side, one.delay))},
        {marker: "x", size: 7, line_color: colour("ink"), line_width: 1.5},
      );
    }
  }

  drawAxis(figure, ticker) {
    const B = Bokeh,
      [begin, end] = this.whole;
    const holds = this.view.holds;
    if (holds.length) {
      draw(
        figure,
        "quad",
        {
          left: holds.map(one => one[0] / 1000),
          right: holds.map(one => one[1] / 1000),
          bottom: holds.map(() => -11),
          top: holds.map(() => 11),
        },
        {fill_color: null, line_color: null, hatch_pattern: "/", hatch_color: colour("quiet"), hatch_alpha: 0.25},
      );
    }
    for (const y of [-LINE, LINE]) {
      draw(
        figure,
        "segment",
        {x0: [begin], x1: [end], y0: [y], y1: [y]},
        {line_color: colour("ink"), line_width: 1, line_alpha: 0.55},
      );
    }
    const formatter = new B.BasicTickFormatter();
    formatter.doFormat = ticks => ticks.map(t => this.timeOfDay(t, this.step < 1 ? (this.step < 0.1 ? 2 : 1) : 0));
    figure.add_layout(
      new B.LinearAxis({
        fixed_location: 0,
        ticker,
        formatter,
        axis_line_color: null,
        major_tick_line_color: null,
        minor_tick_line_color: null,
        major_label_text_color: colour("quiet"),
        major_label_text_font: colour("figures"),
        major_label_text_font_size: "11px",
        major_label_standoff: -9,
        axis_label: null,
      }),
      "below",
    );
    this.drawMessages(figure);
    this.drawEvents(figure);
  }

  drawMessages(figure) {
    const rows = this.view.messages.rows.filter(row => !row.repeated);
    if (!rows.length) return;
    const from = this.view.messages.rows[0].from;
    const side = row => (row.from === from ? 1 : -1);
    draw(
      figure,
      "scatter",
      {
        x: rows.map(row => row.at / 1000),
        y: rows.map(row => 16.5 * side(row)),
        shape: rows.map(row => (side(row) > 0 ? "inverted_triangle" : "triangle")),
      },
      {marker: {field: "shape"}, size: 7, fill_color: colour("quiet"), line_color: null},
    );
  }

  drawEvents(figure) {
    const shown = this.events.filter(one => one.t >= this.whole[0] && one.t <= this.whole[1]);
    if (!shown.length) return;
    const ears = Object.fromEntries(this.lanes.map(lane => [lane.id, SIDES[lane.ear]]));
    draw(
      figure,
      "text",
      {
        x: shown.map(one => one.t),
        y: shown.map(one => 18.5 * (ears[one.stream] || 1)),
        text: shown.map(one => (one.event === "digit" ? one.digit || "•" : "♪")),
      },
      {
        text_align: "center",
        text_baseline: "middle",
        text_font: colour("figures"),
        text_font_size: "12px",
        text_font_style: "bold",
        text_color: colour("ink"),
      },
    );
  }

  // Ticks at whole seconds or minutes of the reader's clock.
  ticker() {
    const ticker = new Bokeh.BasicTicker();
    ticker.get_ticks = (low, high) => {
      const width = this.width();
      const room = Math.max(2, Math.floor(width / 92));
      this.step = STEPS.find(step => (high - low) / step <= room) || Math.ceil((high - low) / room / 3600) * 3600;
      const origin = (this.view.begin_ms / 1000 + this.view.ahead_s) % 86400;
      const major = [];
      for (let k = Math.ceil((low + origin) / this.step); k * this.step - origin <= high; k++) {
        const t = k * this.step - origin;
        // A label needs room on both sides.
        if (t - low > ((high - low) * 30) / width && high - t > ((high - low) * 30) / width) major.push(t);
      }
      return {major, minor: []};
    };
    return ticker;
  }

  timeOfDay(t, digits = 0) {
    return clock(this.view.begin_ms + t * 1000, this.view.ahead_s, digits);
  }
}
