// The sections of a call, one function each.

const LONG_SENTENCE = 130;

function showVerdict(view, slot) {
  const {verdict, facts} = view;
  const parts = [
    view.id,
    `${day(view.begin_ms, view.ahead_s)} ${clock(view.begin_ms, view.ahead_s)}`,
    `${facts.caller || "unknown"} → ${facts.callee || "unknown"}`,
  ];
  if (known(facts.duration_s))
    parts.push(facts.duration_s < 60 ? `${figure(facts.duration_s)} s` : `${span(facts.duration_s)} min`);
  if (facts.encoding) parts.push(facts.encoding);
  if (facts.outcome && facts.outcome !== "media only") parts.push(facts.outcome);
  slot("who").append(parts.join(" · "));
  for (const leg of view.legs) slot("who").append(" · ", make("a", {href: `#${leg}`}, `other leg ${leg}`));
  slot("sentence").textContent = verdict.sentence;
  slot("sentence").classList.toggle("long", verdict.sentence.length > LONG_SENTENCE);
  slot("ratings").textContent = verdict.ratings;
  slot("worst").textContent = verdict.worst;
  slot("where").textContent = verdict.where;
  slot("where-box").hidden = !verdict.where;
  slot("next").textContent = verdict.check_next;
  slot("next-box").hidden = !verdict.check_next;
  for (const ear of view.ears) slot(`rating-${ear.side}`).append(...ratingWords(ear));
}

function ratingWords(ear) {
  if (!ear.streams.length) return ["nothing was captured this way"];
  if (known(ear.r)) return [term(`R ${figure(ear.r)}`, audit.notes.steps.R.note), ` ${ear.band}`];
  return [ear.note ? term("not rated", `Not rated: ${ear.note}.`) : "not rated"];
}

function showFindings(view, slot, tape) {
  slot("no-findings").hidden = view.findings.length > 0;
  const ears = Object.fromEntries(view.streams.map(one => [one.id, one.ear]));
  const items = view.findings.map((finding, k) => {
    const page = audit.notes.findings[finding.finding];
    const button = make(
      "button",
      {type: "button", class: "finding-name", "aria-pressed": "false"},
      make("span", {class: "number", "aria-hidden": "true"}, String(k + 1)),
      inWords(finding.finding),
    );
    button.addEventListener("click", () => {
      tape.choose(k);
      tape.stage.scrollIntoView({block: "nearest"});
    });
    return make(
      "li",
      {id: `${view.id}-f${k + 1}`},
      make("p", {class: "finding-line"}, button, make("span", {class: "quiet"}, findingFacts(view, finding, ears))),
      make("p", {class: "says"}, finding.says || ""),
      make(
        "p",
        {class: "quiet"},
        finding.check_next ? `Check next: ${finding.check_next} ` : "",
        page ? term("How it is known", findingNote(finding, page)) : null,
      ),
    );
  });
  slot("findings").replaceChildren(...items);
  return k =>
    items.forEach((item, place) => {
      item.classList.toggle("chosen", place === k);
      item.querySelector("button").setAttribute("aria-pressed", String(place === k));
    });
}

function findingFacts(view, finding, ears) {
  const told = [finding.severity];
  if (known(finding.r_points) && finding.r_points > 0.05) told.push(`costs ${figure(finding.r_points)} of R`);
  if (known(finding.measured)) {
    const limit = known(finding.limit) ? `, limit ${figure(finding.limit)}` : "";
    told.push(`${figure(finding.measured)} ${finding.unit || ""}${limit}`);
  }
  if (known(finding.from_s)) {
    const at = t => clock(view.begin_ms + t * 1000, view.ahead_s, 1);
    told.push(
      known(finding.to_s) && finding.to_s - finding.from_s > 0.1
        ? `${at(finding.from_s)} to ${at(finding.to_s)}`
        : `at ${at(finding.from_s)}`,
    );
  }
  if (ears[finding.stream]) told.push(`${ears[finding.stream]}’s ear`);
  if (finding.where && finding.where !== "unknown") told.push(finding.where);
  if (known(finding.confidence_pct)) told.push(`${figure(finding.confidence_pct)} % sure`);
  return told.filter(Boolean).join(" · ");
}

function findingNote(finding, page) {
  const limit = figure(known(finding.limit) ? finding.limit : page.limit);
  return (
    `${page.means} Measured as: ${page.measured_as}. Limit: ${limit} ${page.unit} (${finding.basis || page.basis}). ` +
    `How grave: ${page.severity}.`
  );
}

// Messages in order of time between the hosts that exchanged them.
function showMessages(view, slot, seek) {
  const {rows, in_all: inAll} = view.messages;
  slot("messages-box").hidden = !rows.length;
  if (!rows.length) return;
  const hosts = [...new Set(rows.flatMap(row => [row.from, row.to]))].filter(Boolean);
  const drawn = hosts.length <= 6;
  slot("messages-note").textContent =
    inAll > rows.length
      ? `The first and last ${rows.length / 2} of ${many(inAll, "message")}; all of them in signalling.csv.`
      : "";
  slot("hosts").hidden = !drawn;
  slot("hosts").style.setProperty("--hosts", hosts.length);
  slot("hosts").replaceChildren(
    make("span", {class: "ladder-time"}),
    ...hosts.map(host => make("span", {class: "host"}, host)),
  );
  slot("messages").style.setProperty("--hosts", hosts.length);
  slot("messages").replaceChildren(
    ...rows.map(row => {
      const from = hosts.indexOf(row.from),
        to = hosts.indexOf(row.to);
      const left = Math.min(from, to),
        width = Math.max(1, Math.abs(to - from));
      const when = make(
        "button",
        {
          type: "button",
          class: "ladder-time",
          "aria-label": `Go to ${clock(view.begin_ms + row.at, view.ahead_s, 3)}`,
          onclick: () => seek(row.at / 1000),
        },
        clock(view.begin_ms + row.at, view.ahead_s, 3),
      );
      const words = make(
        "span",
        {class: "ladder-words", title: row.line || ""},
        row.line || row.message || "",
        row.repeated ? " (repeated)" : "",
      );
      const arrow = drawn
        ? make("span", {
            class: `arrow ${to < from ? "back" : ""}`,
            "aria-hidden": "true",
            style: {left: `calc((${left} + 0.5) * 100% / var(--hosts))`, width: `calc(${width} * 100% / var(--hosts))`},
          })
        : null;
      return make(
        "li",
        {class: row.repeated ? "repeated" : ""},
        when,
        make(
          "span",
          {class: "ladder-lane"},
          make("span", {class: drawn ? "unseen" : "ladder-ends"}, `${row.from} → ${row.to}: `),
          words,
          arrow,
        ),
      );
    }),
  );
}

// Terms down, streams across: the table stays readable on a narrow screen, and two streams stand side by side.
function showFacts(view, slot) {
  slot("facts-box").hidden = !view.streams.length;
  if (!view.streams.length) return;
  const head = make(
    "tr",
    {},
    make("th", {scope: "col"}, "Stream"),
    ...view.streams.map(one =>
      make("th", {scope: "col"}, one.id, make("span", {class: "quiet"}, ` to the ${one.ear}`)),
    ),
  );
  const bodies = audit.notes.facts.map(({group, rows}) => {
    const told = rows.filter(row => view.streams.some(one => known(one.facts[row.name])));
    return told.length
      ? make(
          "tbody",
          {},
          make("tr", {class: "group"}, make("th", {scope: "rowgroup", colspan: view.streams.length + 1}, group)),
          ...told.map(row =>
            make(
              "tr",
              {},
              make("th", {scope: "row"}, term(row.words, `${row.name}: ${row.note}`)),
              ...view.streams.map(one =>
                make("td", {class: row.kind === "text" ? "" : "figure"}, cell(row, one.facts[row.name])),
              ),
            ),
          ),
        )
      : null;
  });
  slot("facts").replaceChildren(
    make("caption", {class: "unseen"}, "Figures of each stream"),
    make("thead", {}, head),
    ...bodies.filter(Boolean),
  );
  showReports(view, slot);
}

function cell(row, value) {
  if (!known(value)) return "–";
  if (row.kind === "yes_no") return value ? "yes" : "no";
  if (row.kind === "text") return value;
  const plain = row.kind === "count" && row.unit !== "packets" ? String(value) : figure(value);
  return row.unit && row.unit !== "packets"
    ? `${plain} ${row.unit}`
    : row.kind === "count" && row.unit
      ? value.toLocaleString("en-GB")
      : plain;
}

function showReports(view, slot) {
  const {rows, in_all: inAll} = view.reports;
  slot("reports-box").hidden = !rows.length;
  if (!rows.length) return;
  const columns = [
    ["report", "Report"],
    ["loss_pct", "Loss it saw, %"],
    ["captured_loss_pct", "Loss in this capture, %"],
    ["jitter_ms", "Jitter it saw, ms"],
    ["round_trip_ms", "Round trip, ms"],
    ["set_aside", "Set aside because"],
  ].filter(([name]) => rows.some(row => known(row[name])));
  slot("reports").replaceChildren(
    make(
      "caption",
      {},
      inAll > rows.length
        ? `The first and last ${rows.length / 2} of ${inAll}; all of them in reports.csv.`
        : `${many(inAll, "report")}`,
    ),
    make(
      "thead",
      {},
      make(
        "tr",
        {},
        make("th", {scope: "col"}, "Time"),
        make("th", {scope: "col"}, "Stream"),
        ...columns.map(([, words]) => make("th", {scope: "col"}, words)),
      ),
    ),
    make(
      "tbody",
      {},
      ...rows.map(row =>
        make(
          "tr",
          {},
          make("td", {}, clock(view.begin_ms + row.at, view.ahead_s, 1)),
          make("td", {}, row.stream || ""),
          ...columns.map(([name]) =>
            make(
              "td",
              {class: typeof row[name] === "number" ? "figure" : ""},
              typeof row[name] === "number" ? figure(row[name]) : row[name] || "",
            ),
          ),
        ),
      ),
    ),
  );
}
