// One clip at a time, in an order of this listener's own. Whatever is known is kept in the browser until it is saved as a file.

const check = JSON.parse(document.getElementById("check-data").textContent);
const KEPT = `rtpaudit-listening-${check.check}`;
const QUIET = 0.15;
const COLUMNS = ["check", "listener", "session", "clip", "vote", "comment", "place", "plays", "rated_at"];

const slot = name => document.getElementById(name);
const sound = slot("sound");
const clips = new Map(check.clips.map(clip => [clip.name, clip]));

// A store may be closed to a page that is opened from disk.
function keep() {
  try {
    localStorage.setItem(KEPT, JSON.stringify(state));
    return true;
  } catch {
    return false;
  }
}

function kept() {
  try {
    const found = JSON.parse(localStorage.getItem(KEPT));
    const whole = found && Array.isArray(found.order) && found.order.length === clips.size && found.order.every(name => clips.has(name));
    return whole ? found : null;
  } catch {
    return null;
  }
}

function fresh() {
  const order = [...clips.keys()];
  const chance = crypto.getRandomValues(new Uint32Array(order.length));
  for (let k = order.length - 1; k > 0; k--) {
    const other = chance[k] % (k + 1);
    [order[k], order[other]] = [order[other], order[k]];
  }
  const session = [...crypto.getRandomValues(new Uint8Array(4))].map(octet => octet.toString(16).padStart(2, "0")).join("");
  return {listener: "", session, order, place: 0, volume: QUIET, keys: true, begun: false, ratings: {}};
}

// Each visit starts quiet, whatever the last one was set to.
const state = {...(kept() ?? fresh()), volume: QUIET};

const name = () => state.order[state.place];
const rating = (clip = name()) => state.ratings[clip] ??= {vote: null, comment: "", plays: 0, at: ""};
const rated = () => state.order.filter(clip => state.ratings[clip]?.vote);

function show(view) {
  for (const one of ["start", "rate", "end"]) slot(one).hidden = one !== view;
  if (view !== "rate") sound.pause();
}

function begin(event) {
  event.preventDefault();
  state.listener = slot("listener").value.trim();
  if (!state.listener) return;
  state.begun = true;
  slot("kept").textContent = keep() ? "" : "This browser does not keep your progress: save the ratings before you close the sheet.";
  turnTo(state.place);
}

function turnTo(place) {
  state.place = place;
  keep();
  show("rate");
  sound.pause();
  sound.src = clips.get(name()).file;
  sound.volume = state.volume;
  slot("which").textContent = `Clip ${place + 1} of ${state.order.length}`;
  slot("volume").value = String(state.volume);
  slot("comment").value = rating().comment;
  slot("back").disabled = place === 0;
  slot("next").textContent = place + 1 === state.order.length ? "Finish" : "Next";
  for (const radio of document.getElementsByName("vote")) radio.checked = Number(radio.value) === rating().vote;
  slot("played").value = 0;
  tell();
  slot("which").focus();
}

function tell(text) {
  const heard = rating().plays > 0;
  slot("scale").disabled = !heard;
  slot("done").value = rated().length;
  slot("play").textContent = sound.paused ? (heard ? "Play again" : "Play") : "Pause";
  slot("said").textContent = text ?? (heard ? "" : "Listen to the end, then rate.");
}

function play() {
  if (!sound.paused) sound.pause();
  else sound.play().catch(fail);
}

function fail() {
  if (!sound.error) return;
  tell("This clip cannot be played: is the folder clips still beside this sheet? Go on to the next one, and say so.");
}

function vote(value) {
  if (slot("scale").disabled) {
    tell("Listen to the end first.");
    return;
  }
  Object.assign(rating(), {vote: value, at: new Date().toISOString()});
  for (const radio of document.getElementsByName("vote")) radio.checked = Number(radio.value) === value;
  keep();
  tell(`Rated ${value}, ${check.scale[value]}.`);
}

function next() {
  if (state.place + 1 < state.order.length) turnTo(state.place + 1);
  else finish();
}

function back() {
  if (state.place > 0) turnTo(state.place - 1);
}

function finish() {
  show("end");
  const count = rated().length, left = state.order.filter(clip => !state.ratings[clip]?.vote);
  slot("ended").textContent = left.length ? "Some clips are not rated yet" : "Thank you, that was all";
  slot("missing").textContent = `${count} of ${state.order.length} clips rated.`;
  slot("left").replaceChildren(...left.map(clip => {
    const item = document.createElement("li"), button = document.createElement("button");
    button.type = "button";
    button.textContent = `Clip ${state.order.indexOf(clip) + 1}`;
    button.addEventListener("click", () => turnTo(state.order.indexOf(clip)));
    item.append(button);
    return item;
  }));
  slot("ended").focus();
}

// Quoted throughout; what a spreadsheet would take for a formula gets an apostrophe.
function cell(value) {
  const text = String(value ?? "").replace(/\s+/g, " ");
  return `"${(/^[=+\-@]/.test(text) ? `'${text}` : text).replaceAll('"', '""')}"`;
}

function save() {
  const rows = state.order.map((clip, place) => {
    const {vote, comment, plays, at} = rating(clip);
    return [check.check, state.listener, state.session, clip, vote, comment, place + 1, plays, at].map(cell).join(",");
  });
  const file = new Blob([[COLUMNS.join(","), ...rows, ""].join("\r\n")], {type: "text/csv"});
  const link = document.createElement("a");
  link.href = URL.createObjectURL(file);
  link.download = `votes-${check.check}-${state.listener.replace(/[^\p{L}\p{N}]+/gu, "-").slice(0, 40)}.csv`;
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 60_000);
  slot("saved").textContent = `Saved as ${link.download}, where this browser puts its downloads.`;
}

function forget() {
  try {
    localStorage.removeItem(KEPT);
  } catch { /* nothing was kept */ }
  Object.assign(state, fresh());
  slot("listener").value = "";
  slot("saved").textContent = "";
  show("start");
  slot("listener").focus();
}

function key(event) {
  const typing = event.target.matches("textarea, input[type=text]"), pressing = event.target.matches("button, input[type=checkbox], input[type=range]");
  if (slot("rate").hidden || event.ctrlKey || event.altKey || event.metaKey) return;
  if (typing) {
    if (event.key === "Escape") slot("which").focus();
    return;
  }
  if (!state.keys) return;
  const does = {" ": play, Enter: next, Backspace: back, c: () => slot("comment").focus(), C: () => slot("comment").focus()}[event.key];
  const choosing = event.target.matches("input[type=radio]") && event.key === " ";
  if (choosing || pressing && (event.key === " " || event.key === "Enter")) return;
  if (does) does();
  else if (check.scale[event.key]) vote(Number(event.key));
  else return;
  event.preventDefault();
}

slot("begin").addEventListener("submit", begin);
slot("play").addEventListener("click", play);
slot("next").addEventListener("click", next);
slot("back").addEventListener("click", back);
slot("save").addEventListener("click", save);
slot("again").addEventListener("click", () => turnTo(state.place));
slot("forget").addEventListener("click", forget);
slot("keys").addEventListener("change", event => { state.keys = event.target.checked; keep(); });
slot("volume").addEventListener("input", event => { state.volume = sound.volume = Number(event.target.value); });
slot("comment").addEventListener("input", event => { rating().comment = event.target.value; keep(); });
for (const radio of document.getElementsByName("vote")) radio.addEventListener("change", () => vote(Number(radio.value)));
document.addEventListener("keydown", key);
for (const change of ["play", "pause"]) sound.addEventListener(change, () => tell());
sound.addEventListener("error", fail);
sound.addEventListener("timeupdate", () => { slot("played").value = sound.duration ? sound.currentTime / sound.duration : 0; });
sound.addEventListener("ended", () => {
  rating().plays += 1;
  keep();
  slot("played").value = 1;
  tell(rating().vote ? "" : "Now rate it.");
});

slot("listener").value = state.listener;
slot("keys").checked = state.keys;
if (state.begun) turnTo(state.place);
else show("start");
document.documentElement.dataset.ready = "";
