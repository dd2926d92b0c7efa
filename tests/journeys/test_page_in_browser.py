"""The page as a reader meets it: opened from disk in headless Chromium, by mouse, by keyboard and on paper."""

import json
import re
import shutil
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pytest

from rtpaudit.report.folder import write_folder
from rtpaudit.report.tables import build_tables
from rtpaudit.walk import audit
from tests.journeys.conftest import CAPTURES, Command
from tests.report import made
from tests.report.many_calls import DEMO, many_calls

sync_api = pytest.importorskip("playwright.sync_api", reason="playwright drives the browser, and is not installed")
CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="chromium is not installed")

AXE = CAPTURES.parents[0] / "axe" / "axe.min.js"
OPTIONS = [
    "--no-sandbox",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-default-apps",
    "--disable-sync",
    "--no-first-run",
]
DESKTOP, PHONE = {"width": 1440, "height": 1000}, {"width": 390, "height": 844}
HOSTILE = "</script><script>window.hacked = 1</script><img src=x onerror='window.hacked = 1'>"

Page = Any


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    with sync_api.sync_playwright() as driver:
        chromium = driver.chromium.launch(executable_path=CHROMIUM, args=OPTIONS)
        yield chromium
        chromium.close()


@pytest.fixture
def visit(browser: Any) -> Iterator[Callable[..., Page]]:
    """Open a page from disk; at the end nothing may have gone wrong in it, and nothing been asked of a network."""
    wrong: list[str] = []
    contexts = []

    def visit(place: Path, fragment: str = "", **options: Any) -> Page:
        context = (
            browser.new_context(viewport=DESKTOP, **options)
            if "viewport" not in options
            else browser.new_context(**options)
        )
        contexts.append(context)
        page = context.new_page()
        page.on("pageerror", lambda fault: wrong.append(str(fault)))
        page.on("console", lambda said: wrong.append(said.text) if said.type in ("error", "warning") else None)
        page.on("request", lambda asked: None if re.match("file:|blob:|data:", asked.url) else wrong.append(asked.url))
        page.goto(f"{(place / 'index.html').as_uri()}{fragment}")
        page.wait_for_selector("html[data-ready]", state="attached", timeout=20_000)
        return page

    yield visit
    for context in contexts:
        context.close()
    assert not wrong


def report(place: Path, **changed: Any) -> Path:
    """A report on the demo with findings whose place is known, and hostile names."""
    found = audit(DEMO)
    call = next(one for one in found.assessment.calls if one.id == "c02")
    call.headline = "loss-burst"
    lossy = next(one.id for one in call.from_caller)
    begin_s = (call.from_caller[0].started_ns - call.started_ns) / 1e9
    rows = [
        made.row("findings", finding="loss-burst", call="c02", stream=lossy, severity="fault", r_points=28.0,
                 from_s=begin_s + 10.4, to_s=begin_s + 11.6, where="before capture point", measured=1240.0, limit=60.0,
                 unit="ms", confidence_pct=95.0, basis="ITU-T G.711 Appendix I", check_next="Look at the uplink.",
                 says="The callee heard 1.2 s of speech break off."),
        made.row("findings", finding="marking-absent", call="c02", stream=call.from_callee[0].id, severity="remark",
                 says=HOSTILE),
    ]  # fmt: skip
    doctored = made.Audited(found.assessment)
    doctored.sound = found.sound
    for key, value in changed.items():
        setattr(call, key, value)
    tables = build_tables(
        found.assessment, findings=rows, signalling=found.assessment.messages, events=found.assessment.events
    )
    doctored.tables = tables
    write_folder(doctored, place, zone=ZoneInfo("Europe/Vienna"))
    return place


@pytest.fixture(scope="module")
def doctored(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return report(tmp_path_factory.mktemp("doctored") / "out", caller=HOSTILE)


def axes(page: Page) -> list[float]:
    """Begin and end of what the time line shows, as its clock tells it. [s of the day]"""
    told = re.findall(r"(\d\d):(\d\d):([\d.]+)", page.locator("[data-slot=shown]").inner_text())
    return [int(hours) * 3600 + int(minutes) * 60 + float(seconds) for hours, minutes, seconds in told]


def place(page: Page) -> float:
    return float(page.locator("[data-slot=seek]").input_value())


def until(page: Page, condition: str, patience_s: float = 10.0) -> None:
    """Wait until something holds; the page permits no script of ours to do so within it."""
    began = time.monotonic()
    while not page.evaluate(condition):
        assert time.monotonic() - began < patience_s, condition
        page.wait_for_timeout(20)


def start_playing(page: Page) -> None:
    page.get_by_role("button", name="Play", exact=True).click()
    page.get_by_role("button", name="Play quietly").click()
    until(page, "document.querySelector('[data-slot=play]').textContent === 'Pause'")


def test_the_demo_opens_with_its_worst_call(command: Command, place: Path, visit: Callable[..., Page]) -> None:
    assert command("demo", "--zone", "UTC", "--quiet").returncode == 0
    page = visit(place / "demo-audit")
    worst = page.locator("[role=option]").first
    assert worst.get_attribute("aria-selected") == "true"
    assert page.locator("h2[data-slot=sentence]").inner_text().endswith(".")
    assert page.locator(".drawing canvas").count() > 0


@pytest.mark.parametrize("capture", ["proxy-two-legs.mon.pcap", "rtp-g722.b.pcap", "dtmf-rfc4733.b-any-sll.pcap"])
def test_a_real_capture_opens(command: Command, place: Path, visit: Callable[..., Page], capture: str) -> None:
    assert command("triage", CAPTURES / capture, "--zone", "UTC", "--quiet").returncode == 0
    page = visit(place / f"{capture.removesuffix('.pcap')}-audit")
    assert page.locator(".drawing canvas").count() > 0
    assert "UTC" in page.locator("[data-slot=shown]").inner_text()


def test_a_click_on_a_finding_moves_the_axes_to_it(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    begin, end = axes(page)
    page.get_by_role("button", name="loss burst", exact=False).last.click()
    at, to = axes(page)
    length, into = to - at, at - begin
    assert end - begin > 20
    assert 3 < length < 6
    # 10.4 s of the stream, which begins 2.4 s after the INVITE.
    assert into < 12.8 < into + length
    assert page.locator(".findings li.chosen").count() == 1
    assert page.locator(".flag[aria-pressed=true]").inner_text() == "1"


def test_an_address_names_call_and_finding(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02/f1")
    page.wait_for_selector(".findings li.chosen")
    at, to = axes(page)
    assert to - at < 6
    assert page.locator(".list [aria-selected=true]").get_attribute("id") == "row-c02"


def test_sound_starts_quiet_after_a_caution_and_the_cursor_moves(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    assert float(page.locator("[data-slot=volume]").input_value()) <= 0.2
    start_playing(page)
    before = place(page)
    cursor = page.locator(".cursor").bounding_box()["x"]
    until(page, "Number(document.querySelector('[data-slot=seek]').value) > 0.6")
    assert place(page) > before
    assert page.locator(".cursor").bounding_box()["x"] > cursor
    page.get_by_role("button", name="Pause").click()
    page.get_by_role("button", name="Play", exact=True).click()
    # The caution stands once.
    until(page, "document.querySelector('[data-slot=play]').textContent === 'Pause'")


def test_a_caution_that_is_declined_plays_nothing(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    page.get_by_role("button", name="Play", exact=True).click()
    assert "consent" in page.get_by_role("dialog").inner_text()
    page.get_by_role("button", name="Not now").click()
    assert page.locator("[data-slot=play]").inner_text() == "Play"


def test_switching_between_heard_and_sent_keeps_the_position(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    page.evaluate("""() => {
      const play = HTMLMediaElement.prototype.play;
      window.played = [];
      HTMLMediaElement.prototype.play = function () {
        window.played.push([this.src, this.currentTime]);
        return play.call(this);
      };
    }""")
    page.locator("[data-slot=seek]").fill("13")
    start_playing(page)
    until(page, "Number(document.querySelector('[data-slot=seek]').value) > 13.3")
    page.get_by_label("as sent").check()
    at = place(page)
    assert 13.3 <= at < 15
    until(page, f"Number(document.querySelector('[data-slot=seek]').value) > {at + 0.3}")
    assert place(page) < at + 2
    page.get_by_label("callee’s ear").check()
    played = page.evaluate("window.played")
    names = [Path(source).name for source, _ in played]
    assert names[0] == "c02.wav"
    assert {"c02-s03-sent.wav", "c02-s04-sent.wav"} <= set(names[1:])
    # The stream begins some 2.4 s after the call, and its file with it.
    assert all(10 < seconds < 14 for source, seconds in played if "sent" in source)


def test_a_click_on_the_time_line_moves_the_sound_there(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    box = page.locator(".drawing").bounding_box()
    page.mouse.click(box["x"] + 62 + (box["width"] - 70) * 0.5, box["y"] + 60)
    assert place(page) == pytest.approx(11.5, abs=1.0)


def test_the_pointer_reads_values_at_both_ears(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    box = page.locator(".drawing").bounding_box()
    page.mouse.move(box["x"] + box["width"] * 0.59, box["y"] + 100)
    caller, callee = (page.locator(f"[data-slot=readout-{ear}]").inner_text() for ear in ("caller", "callee"))
    assert re.search(r"R 9\d(\.\d)? best · 0 lost and 0 too late", caller)
    assert "missing here" in callee
    assert re.fullmatch(r"11:42:1\d\.\d\d", page.locator("[data-slot=moment]").inner_text())


def test_the_mouse_drags_and_zooms_the_picture_and_leaves_the_sound_where_it_is(
    doctored: Path, visit: Callable[..., Page]
) -> None:
    page = visit(doctored, "#c02/f1")
    page.wait_for_selector(".findings li.chosen")
    before, at = axes(page), place(page)
    box = page.locator(".drawing").bounding_box()
    x, y = box["x"] + box["width"] / 2, box["y"] + 60
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + 200, y, steps=8)
    page.mouse.up()
    dragged = axes(page)
    assert dragged[0] < before[0] - 0.4
    assert dragged[1] - dragged[0] == pytest.approx(before[1] - before[0], abs=0.25)
    page.keyboard.down("Control")
    page.mouse.wheel(0, -300)
    page.keyboard.up("Control")
    until(page, f"!document.querySelector('[data-slot=shown]').textContent.includes('{dragged[1] - dragged[0]:.2f}')")
    inner = axes(page)
    assert inner[1] - inner[0] < dragged[1] - dragged[0]
    assert place(page) == at


def test_zooming_moves_flags_and_axis_together(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02/f1")
    page.wait_for_selector(".findings li.chosen")
    near = page.locator(".flag").first.bounding_box()["x"]
    page.get_by_role("button", name="Whole call").click()
    assert page.locator(".flag").first.bounding_box()["x"] != near
    begin, end = axes(page)
    page.get_by_role("button", name="Show less, larger").click()
    inner, outer = axes(page)
    assert (outer - inner) == pytest.approx((end - begin) / 2, rel=0.1)


def test_names_from_a_capture_stay_text(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    assert HOSTILE in page.locator("[data-slot=who]").inner_text()
    assert HOSTILE in page.locator(".says").last.inner_text()
    assert page.evaluate("window.hacked") is None
    assert page.locator("main img, .list img").count() == 0


def test_search_narrows_and_order_sorts(tmp_path: Path, visit: Callable[..., Page]) -> None:
    write_folder(many_calls(60), tmp_path / "out", audio=False)
    page = visit(tmp_path / "out")
    rows = page.locator("[role=option]")
    assert page.locator("#list-count").inner_text() == "60 calls"
    page.get_by_label("Search").fill("01632960041")
    assert page.locator("#list-count").inner_text() == "1 of 60 calls"
    assert "c42" in rows.first.inner_text()
    page.get_by_label("Search").fill("nobody of this name")
    assert rows.count() == 0
    page.get_by_label("Search").fill("")
    page.get_by_label("Order").select_option("time")
    assert rows.first.get_attribute("id") == "row-c01"
    page.get_by_label("Order").select_option("worst")
    assert rows.first.get_attribute("id") != "row-c01"


def test_the_keyboard_alone_reaches_everything(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored)
    page.keyboard.press("/")
    assert page.evaluate("document.activeElement.id") == "search"
    page.keyboard.press("ArrowDown")
    page.keyboard.press("Home")
    page.keyboard.press("ArrowDown")
    active = page.locator("#rows").get_attribute("aria-activedescendant")
    page.keyboard.press("Enter")
    until(page, f"document.documentElement.dataset.ready === '{active.removeprefix('row-')}'")
    page = visit(doctored, "#c02")
    page.locator(".stage").focus()
    page.keyboard.press("+")
    assert axes(page)[1] - axes(page)[0] < 15
    page.keyboard.press("ArrowRight")
    assert "Callee hears" in page.locator("[data-slot=spoken]").inner_text()
    page.keyboard.press("0")
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.className").startswith("flag")
    page.keyboard.press("Enter")
    assert page.locator(".findings li.chosen").count() == 1
    page.locator(".stage").focus()
    page.keyboard.press(" ")
    assert page.get_by_role("dialog").is_visible()
    page.keyboard.press("Escape")


def test_a_term_opens_its_note_on_focus_and_escape_closes_it(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    term = page.get_by_role("button", name="Delay variation, 95 %")
    term.focus()
    note = page.get_by_role("tooltip")
    assert "RFC 5481" in note.inner_text()
    assert term.get_attribute("aria-describedby") == "note"
    page.keyboard.press("Escape")
    until(page, "document.getElementById('note').hidden")


def test_paper_has_the_words_and_the_picture_but_no_controls(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02")
    page.emulate_media(media="print")
    for hidden in (".list", ".player", ".tape-tools"):
        assert not page.locator(hidden).is_visible()
    for shown in (".overview", ".verdict", ".drawing", ".staircase >> nth=0", ".facts table >> nth=0"):
        assert page.locator(shown).is_visible()
    sheets = page.pdf(format="A4", print_background=True)
    assert 2 <= len(re.findall(rb"/Type\s*/Page\b", sheets)) <= 8


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("size", [DESKTOP, PHONE], ids=["desktop", "phone"])
def test_nothing_stands_in_the_way_of_anybody(
    doctored: Path, visit: Callable[..., Page], size: dict[str, int], scheme: str
) -> None:
    page = visit(doctored, "#c02/f1", viewport=size, color_scheme=scheme)
    page.evaluate(AXE.read_text("utf-8"))
    found = page.evaluate(
        "axe.run({runOnly: ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa', 'best-practice']})"
    )
    told = [f"{one['id']}: {node['html'][:160]}" for one in found["violations"] for node in one["nodes"]]
    assert not told, json.dumps(told, indent=1)


def test_a_phone_shows_it_without_scrolling_sideways(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02", viewport=PHONE, has_touch=True, is_mobile=True)
    assert page.evaluate("document.documentElement.scrollWidth") <= PHONE["width"]
    assert page.locator(".drawing").bounding_box()["width"] > 340


def test_the_night_is_dark_and_the_figures_with_it(doctored: Path, visit: Callable[..., Page]) -> None:
    page = visit(doctored, "#c02", color_scheme="dark")
    assert page.evaluate("getComputedStyle(document.documentElement).backgroundColor") == "rgb(20, 24, 28)"
    assert page.evaluate("document.documentElement.dataset.drawn") == "dark"
    page.emulate_media(color_scheme="light")
    until(page, "document.documentElement.dataset.drawn === 'light'")


def test_a_single_file_plays_wherever_it_is_moved(
    command: Command, place: Path, tmp_path: Path, visit: Callable[..., Page]
) -> None:
    assert command("demo", "--single-file", "--out", "single", "--quiet").returncode == 0
    shutil.copy(place / "single" / "index.html", tmp_path / "index.html")
    page = visit(tmp_path)
    # The streams of the demo begin some two seconds after the first message.
    page.locator("[data-slot=seek]").fill("3")
    start_playing(page)
    until(page, "Number(document.querySelector('[data-slot=seek]').value) > 3.4")
    assert page.locator("[data-slot=sound-note]").inner_text() == ""


def test_of_five_hundred_calls_the_page_opens_at_once_and_the_rest_when_asked(
    tmp_path: Path, visit: Callable[..., Page]
) -> None:
    write_folder(many_calls(500), tmp_path / "out", audio=False)
    # The machine may be busy with something else: it counts that it can.
    for _ in range(3):
        page = visit(tmp_path / "out")
        took_ms = page.evaluate("performance.getEntriesByName('ready')[0].startTime")
        if took_ms < 2000:
            break
    assert took_ms < 2000
    assert page.locator("[role=option]").count() < 40
    last = "c500" if page.locator("script#call-c500").count() == 0 else "c499"
    page.get_by_label("Search").fill(last)
    page.keyboard.press("Enter")
    until(page, f"document.documentElement.dataset.ready === '{last}'")
    assert last in page.locator("[data-slot=who]").inner_text()


def test_ten_thousand_rows_scroll_and_search_without_waiting(tmp_path: Path, visit: Callable[..., Page]) -> None:
    write_folder(many_calls(3), tmp_path / "out", audio=False)
    text = (tmp_path / "out" / "index.html").read_text("utf-8")
    data = json.loads(re.search(r'id="audit-data">(.*?)</script>', text)[1])
    data["calls"] += [[f"c{k}", *data["calls"][0][1:3], f"0163{k}", *data["calls"][0][4:]] for k in range(100, 10_100)]
    (tmp_path / "out" / "index.html").write_text(
        re.sub(r'(id="audit-data">).*?(</script>)', lambda found: found[1] + json.dumps(data) + found[2], text), "utf-8"
    )
    page = visit(tmp_path / "out")
    took = page.evaluate("""async () => {
      const rows = document.getElementById("rows"), search = document.getElementById("search");
      const frame = () => new Promise(done => requestAnimationFrame(() => requestAnimationFrame(done)));
      const began = performance.now();
      for (const share of [0.2, 0.5, 0.9, 0.4]) { rows.scrollTop = rows.scrollHeight * share; await frame(); }
      for (const text of ["0", "01", "016", "0163", "01639999"]) {
        search.value = text; search.dispatchEvent(new Event("input")); await frame();
      }
      return performance.now() - began;
    }""")
    assert page.locator("#list-count").inner_text() == "1 of 10,003 calls"
    assert took < 1500


def test_a_report_without_its_audio_folder_says_so(doctored: Path, tmp_path: Path, browser: Any) -> None:
    shutil.copy(doctored / "index.html", tmp_path / "index.html")
    page = browser.new_page()
    page.goto(f"{(tmp_path / 'index.html').as_uri()}#c02")
    page.wait_for_selector("html[data-ready]", state="attached")
    start_playing(page)
    until(page, "document.querySelector('[data-slot=sound-note]').textContent.includes('folder audio')")
    page.close()
