// Where the rating goes: the steps down to it, and what other playout buffers would have made of the same arrivals.

// Points of R from which another buffer is worth a word.
const WORTH_A_WORD = 3;

// The way from Ro down to R at each ear, as steps on a scale that both share, and the rating at other buffers with it.
function showBudget(view, slot, choose) {
  const rated = view.ears.filter(ear => ear.budget);
  const curves = view.ears.filter(ear => ear.curve && (ear.curve.r.length || ear.curve.late_pct.some(Boolean)));
  slot("budget-box").hidden = !rated.length && !curves.length;
  const low = Math.max(0, Math.min(50, ...rated.map(ear => Math.floor(ear.budget.r / 10) * 10 - 10)));
  const boxes = view.ears
    .filter(ear => ear.budget || curves.includes(ear))
    .map(ear => {
      const box = make("div", {class: "ear-budget"}, make("h4", {}, `At the ${ear.side}’s ear`));
      if (ear.budget) box.append(staircase(ear, low, choose));
      if (curves.includes(ear)) box.append(curveBox(view, ear));
      return box;
    });
  slot("budgets").replaceChildren(...boxes);
}

function staircase(ear, low, choose) {
  const place = value => `${Math.max(0, Math.min(100, ((value - low) / (100 - low)) * 100))}%`;
  const rows = [];
  let level = 0;
  for (const {step, points, findings} of ear.budget.steps) {
    const next = level + points;
    const {words, note} = audit.notes.steps[step];
    if (step === "Ro" || Math.abs(points) >= 0.005) {
      const from = step === "Ro" ? low : Math.min(level, next),
        to = Math.max(level, next);
      rows.push(
        make(
          "tr",
          {},
          make(
            "th",
            {scope: "row"},
            term(words, `${step}: ${note}`),
            ...findings.flatMap(k => [
              " ",
              make(
                "button",
                {type: "button", class: "number", "aria-label": `Finding ${k}`, onclick: () => choose(k - 1)},
                String(k),
              ),
            ]),
          ),
          make("td", {class: "points"}, step === "Ro" ? figure(points) : `${points > 0 ? "+" : ""}${figure(points)}`),
          make(
            "td",
            {class: "steps"},
            make("span", {
              class: step === "Ro" ? "step first" : "step",
              style: {left: place(from), width: `max(2px, calc(${place(to)} - ${place(from)}))`},
            }),
          ),
        ),
      );
    }
    level = next;
  }
  rows.push(
    make(
      "tr",
      {class: "landing"},
      make("th", {scope: "row"}, term("What is left, R", audit.notes.steps.R.note)),
      make("td", {class: "points"}, figure(ear.budget.r)),
      make(
        "td",
        {class: "steps"},
        make("span", {class: `step band-${band(ear.budget.r)}`, style: {left: "0", width: place(ear.budget.r)}}),
        make("span", {class: "landing-word"}, bandName(ear.budget.r)),
      ),
    ),
  );
  const note =
    known(ear.r) && Math.abs(ear.r - ear.budget.r) >= 0.5
      ? " Over the whole of what was captured; the rating of the call counts from the answer on, without hold."
      : "";
  return make(
    "table",
    {class: "staircase"},
    make("caption", {}, `Points of R, step by step; the scale goes from ${low} to 100.${note}`),
    make(
      "thead",
      {class: "unseen"},
      make(
        "tr",
        {},
        make("th", {scope: "col"}, "Step"),
        make("th", {scope: "col"}, "Points"),
        make("th", {scope: "col"}, "Picture"),
      ),
    ),
    make("tbody", {}, ...rows),
  );
}

function curveBox(view, ear) {
  const {curve} = ear,
    [today, r] = curve.today,
    [best, bestR] = curve.best;
  const rated = curve.r.length > 0;
  let words;
  if (!rated) words = "Share of packets that come too late, against the delay of a fixed playout buffer.";
  else if (bestR - r < WORTH_A_WORD)
    words =
      `The playout delay of ${figure(today)} ms suited this call: no fixed buffer would have gained ${WORTH_A_WORD} ` +
      "points of R.";
  else
    words =
      `With a fixed playout buffer of ${figure(best)} ms this would have been R ${figure(bestR)} ${bandName(bestR)}, ` +
      `instead of ${figure(r)} with ${figure(today)} ms.`;
  const target = make("div", {
    class: "curve",
    role: "img",
    "aria-label": `${rated ? "Rating" : "Share too late"} against playout delay. ${words}`,
  });
  const box = make("div", {class: "curve-box"}, make("p", {}, words), target);
  box.draw = () => drawCurve(curve, target);
  return box;
}

async function drawCurve(curve, target) {
  const B = Bokeh,
    rated = curve.r.length > 0,
    values = rated ? curve.r : curve.late_pct;
  const low = Math.min(...values, rated ? 50 : 0),
    high = Math.max(...values, rated ? 95 : 1);
  const margin = (high - low) * 0.16;
  const figure_ = Bokeh.Plotting.figure({
    height: 190,
    sizing_mode: "stretch_width",
    tools: "",
    toolbar_location: null,
    min_border_right: 12,
    x_range: new B.Range1d({start: 0, end: curve.delay_ms[curve.delay_ms.length - 1]}),
    y_range: new B.Range1d({start: rated ? low - margin : 0, end: high + margin}),
    x_axis_label: "playout delay, ms",
    y_axis_label: rated ? "R" : "too late, %",
    background_fill_color: null,
    border_fill_color: null,
    outline_line_color: null,
  });
  for (const axis of [figure_.xaxis, figure_.yaxis].flat()) {
    axis.axis_line_color = colour("quiet");
    axis.major_tick_line_color = axis.minor_tick_line_color = null;
    axis.major_label_text_color = axis.axis_label_text_color = colour("quiet");
    axis.major_label_text_font = axis.axis_label_text_font = colour("figures");
    axis.major_label_text_font_size = axis.axis_label_text_font_size = "11px";
    axis.axis_label_text_font_style = "normal";
  }
  for (const grid of [figure_.xgrid, figure_.ygrid].flat()) grid.grid_line_color = colour("line");
  const source = {x: curve.delay_ms, y: values, late: curve.late_pct};
  const line = draw(figure_, "line", source, {line_color: colour("wave"), line_width: 2});
  figure_.add_tools(
    new B.HoverTool({
      renderers: [line],
      mode: "vline",
      tooltips: [["playout delay", "@x{0} ms"], ["too late", "@late{0.0} %"], ...(rated ? [["R", "@y{0.0}"]] : [])],
    }),
  );
  if (rated) {
    const points = [
      [curve.best, "best", null],
      [curve.today, "today", colour("accent")],
    ];
    for (const [[x, y], word, fill] of points) {
      draw(
        figure_,
        "scatter",
        {x: [x], y: [y]},
        {
          marker: fill ? "circle" : "diamond",
          size: fill ? 9 : 13,
          fill_color: fill || colour("paper"),
          line_color: fill || colour("ink"),
          line_width: 1.5,
        },
      );
      const right = x > source.x[source.x.length - 1] * 0.8;
      draw(
        figure_,
        "text",
        {x: [x], y: [y], text: [word]},
        {
          x_offset: right ? -9 : 9,
          y_offset: fill ? 14 : -7,
          text_align: right ? "right" : "left",
          text_font: colour("figures"),
          text_font_size: "12px",
          text_color: colour("ink"),
        },
      );
    }
  }
  await showFigure(figure_, target);
}
