// Elements, figures and times. Whatever comes out of a capture becomes a text node, never markup.

const BANDS = [
  [90, "best"],
  [80, "high"],
  [70, "medium"],
  [60, "low"],
  [50, "poor"],
  [-Infinity, "not recommended"],
];

// Columns that no glyph has, for styles and notes only.
const OWN_COLUMNS = ["fill", "shape", "late"];

function make(tag, properties = {}, ...children) {
  const element = document.createElement(tag);
  for (const [name, value] of Object.entries(properties)) {
    if (value === null || value === undefined || value === false) continue;
    if (name === "class") element.className = value;
    else if (name === "style") for (const [key, one] of Object.entries(value)) element.style.setProperty(key, one);
    else if (name.startsWith("on")) element.addEventListener(name.slice(2), value);
    else element.setAttribute(name, value === true ? "" : value);
  }
  element.append(...children.filter(one => one !== null && one !== undefined));
  return element;
}

function known(value) {
  return value !== null && value !== undefined && !Number.isNaN(value);
}

// Three significant digits at most, and no power of ten.
function figure(value) {
  if (!known(value)) return "–";
  if (Math.abs(value) >= 100) return Math.round(value).toLocaleString("en-GB");
  return String(Number(value.toPrecision(3))).replace("-", "−");
}

function many(count, thing) {
  return `${count.toLocaleString("en-GB")} ${thing}${count === 1 ? "" : "s"}`;
}

function milliseconds(value) {
  return value >= 1000 ? `${figure(value / 1000)} s` : `${figure(value)} ms`;
}

function band(r) {
  return known(r) ? BANDS.findIndex(([edge]) => r >= edge) : -1;
}

function bandName(r) {
  return known(r) ? BANDS[band(r)][1] : "not rated";
}

function two(value) {
  return String(value).padStart(2, "0");
}

// Time of day of a moment, by the zone that the report names: `ahead` is its distance from UTC in seconds.
function clock(ms, ahead, digits = 0) {
  const unit = 10 ** (3 - digits);
  const moment = new Date(Math.floor((ms + ahead * 1000) / unit + 1e-6) * unit);
  const text = `${two(moment.getUTCHours())}:${two(moment.getUTCMinutes())}:${two(moment.getUTCSeconds())}`;
  return digits ? `${text}.${String(moment.getUTCMilliseconds()).padStart(3, "0").slice(0, digits)}` : text;
}

function day(ms, ahead) {
  const moment = new Date(ms + ahead * 1000);
  return `${moment.getUTCFullYear()}-${two(moment.getUTCMonth() + 1)}-${two(moment.getUTCDate())}`;
}

// Length or place within a call.
function span(seconds, digits = 0) {
  const unit = 10 ** digits;
  const whole = Math.round(Math.max(0, seconds) * unit);
  const minutes = Math.floor(whole / (60 * unit));
  const rest = (whole - minutes * 60 * unit) / unit;
  return `${minutes}:${rest.toFixed(digits).padStart(digits ? 3 + digits : 2, "0")}`;
}

function inWords(name) {
  return name.replaceAll("-", " ");
}

function colour(name) {
  return getComputedStyle(document.documentElement).getPropertyValue(`--${name}`).trim();
}

// From which band on a cell is so dark, or by night so light, that figures in it take the colour of the paper.
function dark() {
  return Number(colour("paper-from"));
}

function colours() {
  return BANDS.map((_, level) => colour(`band-${level}`));
}

// Draws columns of data by a glyph of the plotting library; what the style takes from a column it names as a field.
function draw(figure, glyph, data, style) {
  const fields = Object.fromEntries(
    Object.keys(data)
      .filter(name => !(name in style) && !OWN_COLUMNS.includes(name))
      .map(name => [name, {field: name}]),
  );
  return figure[glyph]({...fields, ...style, source: new Bokeh.ColumnDataSource({data})});
}

// Puts a figure in the place of an earlier one. Its elements take no focus: what they show, the page says in words.
async function showFigure(figure, target) {
  target.drawn?.remove();
  target.replaceChildren();
  target.drawn = await Bokeh.Plotting.show(figure, target);
  takeNoFocus(target);
  return target.drawn;
}

function takeNoFocus(element) {
  for (const one of element.querySelectorAll("*")) {
    one.removeAttribute("tabindex");
    if (one.shadowRoot) takeNoFocus(one.shadowRoot);
  }
}

// A term with a note, which shows as long as the pointer is over one of the two, or the focus on the term.
function term(words, text) {
  const button = make("button", {type: "button", class: "term"}, words);
  for (const name of ["pointerenter", "focus", "click"]) button.addEventListener(name, () => showNote(button, text));
  button.addEventListener("pointerleave", () => hideNote(GRACE));
  button.addEventListener("blur", () => hideNote(0));
  return button;
}

// Time to move the pointer from a term into its note.
const GRACE = 150;
const note = document.getElementById("note");
let noted = null;
let hiding = 0;

function showNote(button, text) {
  clearTimeout(hiding);
  noted?.removeAttribute("aria-describedby");
  noted = button;
  note.textContent = text;
  note.hidden = false;
  button.setAttribute("aria-describedby", "note");
  placeNote();
}

// Under its term, or above it where there is no room.
function placeNote() {
  const box = noted.getBoundingClientRect();
  const left = Math.max(8, Math.min(box.left, document.documentElement.clientWidth - note.offsetWidth - 8));
  const below = box.bottom + note.offsetHeight + 4 < window.innerHeight;
  note.style.left = `${left}px`;
  note.style.top = `${below ? box.bottom + 2 : Math.max(4, box.top - 2 - note.offsetHeight)}px`;
}

function hideNote(after) {
  clearTimeout(hiding);
  hiding = setTimeout(() => {
    note.hidden = true;
    noted?.removeAttribute("aria-describedby");
    noted = null;
  }, after);
}

note.addEventListener("pointerenter", () => clearTimeout(hiding));
note.addEventListener("pointerleave", () => hideNote(GRACE));
window.addEventListener("scroll", () => noted && placeNote(), {passive: true});
document.addEventListener("keydown", event => {
  if (event.key === "Escape") hideNote(0);
});
