// The page: which call is open, by the address so that a link can name it, and where its data comes from.

const audit = JSON.parse(document.getElementById("audit-data").textContent);
const main = document.getElementById("call");
const calls = audit.calls.map(readCall);
const NIGHT = matchMedia("(prefers-color-scheme: dark)");
const waiting = new Map();
let opened = null;
let list = null;

// Called by the file of a call that the page itself has no room for.
window.rtpauditCall = view => {
  waiting.get(view.id)?.(view);
  waiting.delete(view.id);
};

function load(id) {
  const inside = document.getElementById(`call-${id}`);
  if (inside) return Promise.resolve(JSON.parse(inside.textContent));
  return new Promise((done, fail) => {
    waiting.set(id, done);
    const script = make("script", {src: `calls/${id}.js`, onerror: () => fail(new Error(id))});
    script.addEventListener("load", () => script.remove());
    document.head.append(script);
  });
}

async function open(id, finding = null) {
  if (opened?.view.id === id) {
    if (finding !== null) opened.tape.choose(finding);
    return;
  }
  list?.mark(id);
  let view;
  try {
    view = await load(id);
  } catch {
    main.replaceChildren(
      make("p", {class: "missing"}, `The part of call ${id} is missing: is the folder calls still beside this page?`),
    );
    return;
  }
  if (wanted().id !== id) return;
  opened?.player.close();
  await show(view);
  if (finding !== null) opened.tape.choose(finding);
}

async function show(view) {
  const part = document.getElementById("call-view").content.cloneNode(true);
  const root = make("article", {class: "call", "aria-labelledby": "verdict-title"});
  root.append(part);
  main.replaceChildren(root);
  const slot = name => root.querySelector(`[data-slot="${name}"]`);
  const tape = new Tape(view, root, t => player.seek(t));
  const player = new Player(view, root, tape);
  tape.onplay = () => player.toggle();
  showVerdict(view, slot);
  const choose = showFindings(view, slot, tape);
  tape.onchoose = choose;
  showBudget(view, slot, k => tape.choose(k));
  showMessages(view, slot, t => {
    player.seek(t);
    tape.stage.scrollIntoView({block: "nearest"});
  });
  showFacts(view, slot);
  opened = {view, tape, player, root};
  document.title = `${view.id}: ${view.verdict.sentence}`.slice(0, 120);
  await paint();
  performance.mark("ready");
  document.documentElement.dataset.ready = view.id;
}

function drawCurves() {
  return Promise.all([...opened.root.querySelectorAll(".curve-box")].map(box => box.draw()));
}

function wanted() {
  const [id, finding] = location.hash.slice(1).split("/");
  const named = calls.some(one => one.id === id);
  return {
    id: named ? id : calls[0]?.id,
    finding: named && /^f\d+$/.test(finding || "") ? Number(finding.slice(1)) - 1 : null,
  };
}

function follow() {
  const {id, finding} = wanted();
  if (id) open(id, finding);
}

function go(id) {
  if (location.hash === `#${id}`) follow();
  else location.hash = id;
  if (matchMedia("(max-width: 900px)").matches) main.scrollIntoView();
}

// The picture has the width of the window, which is to fit a sheet.
const SHEET_WIDTH = 680;

function beforePrint() {
  if (!opened) return;
  for (const box of opened.root.querySelectorAll("details")) box.open = true;
  opened.tape.stage.style.setProperty("--paper-zoom", Math.min(1, SHEET_WIDTH / opened.tape.stage.clientWidth));
}

async function paint() {
  const dark = NIGHT.matches;
  await opened.tape.redraw();
  await drawCurves();
  document.documentElement.dataset.drawn = dark ? "dark" : "light";
}

function start() {
  document.getElementById("overview").classList.add("paper-only");
  if (!calls.length) {
    document.getElementById("overview").classList.remove("paper-only");
    document.documentElement.dataset.ready = "none";
    return;
  }
  document.getElementById("panes").hidden = false;
  if (calls.length > 1) list = new CallList(calls, go);
  else document.getElementById("panes").classList.add("single");
  window.addEventListener("hashchange", follow);
  window.addEventListener("beforeprint", beforePrint);
  NIGHT.addEventListener("change", () => opened && paint());
  document.addEventListener("keydown", event => {
    if (event.key !== "/" || event.target.closest("input, select, textarea") || !list) return;
    event.preventDefault();
    list.search.focus();
  });
  follow();
}

Bokeh.logger.set_level("error");
start();
