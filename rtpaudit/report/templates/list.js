// The list of calls: only the rows in sight are in the document, so that ten thousand stay quick.

const ROW_HEIGHT = 98;
const AHEAD = 6;

function readCall(cells, place) {
  const [
    id,
    begin,
    ahead,
    caller,
    callee,
    length,
    callerR,
    calleeR,
    headline,
    outcome,
    status,
    encoding,
    dialog,
    capture,
  ] = cells;
  return {
    id,
    begin,
    ahead,
    place,
    length,
    callerR,
    calleeR,
    encoding,
    caller: caller || "unknown",
    callee: callee || "unknown",
    headline: headline || "",
    outcome: outcome || "",
    status,
    text: [id, caller, callee, headline, headline && inWords(headline), outcome, status, encoding, dialog, capture]
      .filter(known)
      .join("\n")
      .toLowerCase(),
  };
}

const ORDERS = {
  worst: (a, b) => a.place - b.place,
  time: (a, b) => a.begin - b.begin || a.place - b.place,
  caller: (a, b) => a.caller.localeCompare(b.caller) || a.place - b.place,
  callee: (a, b) => a.callee.localeCompare(b.callee) || a.place - b.place,
  longest: (a, b) => (b.length || 0) - (a.length || 0) || a.place - b.place,
  headline: (a, b) => (a.headline || "~").localeCompare(b.headline || "~") || a.place - b.place,
};

class CallList {
  constructor(calls, open) {
    this.calls = calls;
    this.open = open;
    this.shown = calls;
    this.active = 0;
    this.chosen = "";
    this.box = document.getElementById("rows");
    this.search = document.getElementById("search");
    this.order = document.getElementById("order");
    this.count = document.getElementById("list-count");
    this.filler = make("div", {class: "filler", role: "presentation"});
    this.box.append(this.filler);
    this.severalDays = new Set(calls.map(one => day(one.begin, one.ahead))).size > 1;
    this.search.addEventListener("input", () => this.arrange());
    this.search.addEventListener("keydown", event => this.searchKey(event));
    this.order.addEventListener("change", () => this.arrange());
    this.box.addEventListener("scroll", () => this.draw(), {passive: true});
    this.box.addEventListener("keydown", event => this.key(event));
    this.box.addEventListener("click", event => {
      const row = event.target.closest("[role=option]");
      if (row) this.choose(Number(row.dataset.place));
    });
    new ResizeObserver(() => this.draw()).observe(this.box);
    this.arrange();
  }

  arrange() {
    const words = this.search.value.toLowerCase().split(/\s+/).filter(Boolean);
    const found = this.calls.filter(one => words.every(word => one.text.includes(word)));
    this.shown = found.sort(ORDERS[this.order.value]);
    this.active = Math.max(
      0,
      this.shown.findIndex(one => one.id === this.chosen),
    );
    const all = many(this.calls.length, "call");
    this.count.textContent = words.length ? `${found.length.toLocaleString("en-GB")} of ${all}` : all;
    this.filler.style.height = `${this.shown.length * ROW_HEIGHT}px`;
    this.box.scrollTop = 0;
    this.reveal();
  }

  draw() {
    const first = Math.max(0, Math.floor(this.box.scrollTop / ROW_HEIGHT) - AHEAD);
    const last = Math.min(
      this.shown.length,
      Math.ceil((this.box.scrollTop + this.box.clientHeight) / ROW_HEIGHT) + AHEAD,
    );
    const rows = [];
    for (let place = first; place < last; place++) rows.push(this.row(this.shown[place], place));
    this.filler.replaceChildren(...rows);
    if (this.shown.length) this.box.setAttribute("aria-activedescendant", `row-${this.shown[this.active].id}`);
    else this.box.removeAttribute("aria-activedescendant");
  }

  row(call, place) {
    const time = clock(call.begin, call.ahead);
    const when = this.severalDays ? `${day(call.begin, call.ahead).slice(5)} ${time}` : time;
    const found = call.headline
      ? inWords(call.headline)
      : call.outcome && !/answered|media only/.test(call.outcome)
        ? `${call.outcome}${call.status ? ` ${call.status}` : ""}`
        : "nothing found";
    return make(
      "div",
      {
        role: "option",
        id: `row-${call.id}`,
        class: `row${place === this.active ? " active" : ""}`,
        "data-place": place,
        "aria-selected": String(call.id === this.chosen),
        "aria-setsize": this.shown.length,
        "aria-posinset": place + 1,
        style: {top: `${place * ROW_HEIGHT}px`, height: `${ROW_HEIGHT}px`},
      },
      make("span", {class: "row-when"}, make("b", {}, call.id), ` ${when}`),
      make("span", {class: "row-length"}, known(call.length) ? span(call.length) : ""),
      make("span", {class: "row-who"}, `${call.caller} → ${call.callee}`),
      make("span", {class: "row-found"}, found),
      make("span", {class: "row-ears"}, bar("caller hears", call.callerR), bar("callee hears", call.calleeR)),
    );
  }

  key(event) {
    const page = Math.max(1, Math.floor(this.box.clientHeight / ROW_HEIGHT) - 1);
    const last = this.shown.length - 1;
    const moves = {ArrowDown: 1, ArrowUp: -1, PageDown: page, PageUp: -page, Home: -Infinity, End: Infinity};
    if (event.key in moves && last >= 0) {
      this.active = Math.max(0, Math.min(last, this.active + moves[event.key]));
      this.reveal();
    } else if ((event.key === "Enter" || event.key === " ") && last >= 0) {
      this.choose(this.active);
    } else {
      return;
    }
    event.preventDefault();
  }

  searchKey(event) {
    if (event.key === "ArrowDown") this.box.focus();
    else if (event.key === "Enter" && this.shown.length) this.choose(0);
    else return;
    event.preventDefault();
  }

  choose(place) {
    this.active = place;
    this.open(this.shown[place].id);
  }

  // Marks the call that is open, and brings its row into sight.
  mark(id) {
    this.chosen = id;
    const place = this.shown.findIndex(one => one.id === id);
    if (place >= 0) this.active = place;
    this.reveal();
  }

  reveal() {
    const top = this.active * ROW_HEIGHT;
    if (top < this.box.scrollTop) this.box.scrollTop = top;
    const over = top + ROW_HEIGHT - this.box.clientHeight;
    if (over > this.box.scrollTop) this.box.scrollTop = over;
    this.draw();
  }
}

// The rating at one ear as a short bar; both ears of all calls are on one scale from 0 to 100.
function bar(ear, r) {
  const level = band(r);
  return make(
    "span",
    {class: "bar"},
    make("span", {class: "bar-ear"}, ear),
    make(
      "span",
      {class: "bar-room"},
      known(r)
        ? make("span", {class: `bar-fill band-${level}`, style: {width: `${Math.max(2, Math.min(100, r))}%`}})
        : null,
    ),
    make("span", {class: "bar-r"}, known(r) ? `${figure(r)} ${bandName(r)}` : "not rated"),
  );
}
