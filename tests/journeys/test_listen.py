"""A listening check from capture to outcome: clips and sheet, two listeners at the keyboard, and what they said."""

import csv
import re
import shutil
import subprocess
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
import soundfile

from rtpaudit.listen.key import KeyRow, read_key
from tests.journeys.conftest import CAPTURES, Command
from tests.listen.captures import capture, voice

CHROMIUM = shutil.which("chromium")
AXE = CAPTURES.parents[0] / "axe" / "axe.min.js"
RULES = "['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa', 'best-practice']"
QUICKLY = 12.0
"""how many times as fast as life the clips are played here"""

Page = Any


@pytest.fixture(scope="module")
def made(command: Command, place: Path) -> subprocess.CompletedProcess[str]:
    (place / "call.pcap").write_bytes(capture(voice(60.0), voice(60.0, "guest"), lost=[(20.0, 20.4), (45.0, 45.3)]))
    (place / "short.toml").write_text("[listening]\nclip_s = 3\n", "utf-8")
    return command("listen", "call.pcap", "--out", "check", "--clips", 3, "--profile", "short.toml", "--zone", "UTC")


@pytest.fixture(scope="module")
def key(place: Path, made: subprocess.CompletedProcess[str]) -> dict[str, KeyRow]:
    assert made.returncode == 0, made.stderr
    return read_key(place / "check" / "key.csv")


def test_the_command_says_what_it_made_and_what_comes_next(
    made: subprocess.CompletedProcess[str], key: dict[str, KeyRow]
) -> None:
    assert made.stdout.startswith("3 clips: 2 impaired passages, 1 anchor.\n")
    assert all(clip in made.stdout for clip in key)
    assert "rtpaudit listen --ratings FILE… --key check/key.csv" in made.stdout
    assert "consent" in made.stdout
    assert all(len(line) <= 80 for line in made.stdout.splitlines())


def test_the_lossy_passages_are_among_the_clips(key: dict[str, KeyRow]) -> None:
    assert sorted(row.packets_lost for row in key.values()) == [0, 15, 20]
    assert all(2.4 <= row.duration_s <= 3.6 for row in key.values())


def test_the_clips_are_sound_of_one_level(place: Path, key: dict[str, KeyRow]) -> None:
    for clip, row in key.items():
        samples, rate = soundfile.read(place / "check" / "listeners" / "clips" / f"{clip}.wav", dtype="int16")
        assert len(samples) == pytest.approx(row.duration_s * rate, abs=1)
        assert row.level_dbov == pytest.approx(-26.0, abs=0.5)


# The sheet, in a browser.


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    sync_api = pytest.importorskip("playwright.sync_api", reason="playwright drives the browser, and is not installed")
    if CHROMIUM is None:
        pytest.skip("chromium is not installed")
    with sync_api.sync_playwright() as driver:
        chromium = driver.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
        yield chromium
        chromium.close()


@pytest.fixture
def visit(browser: Any, place: Path, key: dict[str, KeyRow]) -> Iterator[Callable[..., Page]]:
    """Open the sheet from disk; at the end nothing may have gone wrong, and nothing been asked of a network."""
    wrong: list[str] = []
    contexts = []

    def visit(**options: Any) -> Page:
        contexts.append(browser.new_context(**{"viewport": {"width": 1100, "height": 900}} | options))
        page = contexts[-1].new_page()
        page.on("pageerror", lambda fault: wrong.append(str(fault)))
        page.on("console", lambda said: wrong.append(said.text) if said.type in ("error", "warning") else None)
        page.on("request", lambda asked: None if re.match("file:|blob:|data:", asked.url) else wrong.append(asked.url))
        page.goto((place / "check" / "listeners" / "rating-sheet.html").as_uri())
        ready(page)
        return page

    yield visit
    for context in contexts:
        context.close()
    assert not wrong


def ready(page: Page) -> None:
    page.wait_for_selector("html[data-ready]", state="attached")
    page.evaluate(f"document.getElementById('sound').defaultPlaybackRate = {QUICKLY}")


def begin(page: Page, name: str) -> None:
    page.keyboard.press("Tab")
    page.keyboard.type(name)
    page.keyboard.press("Enter")
    assert page.text_content("#which") == "Clip 1 of 3"


def listen(page: Page) -> None:
    page.keyboard.press("Space")
    # The sheet forbids what Playwright's own way of waiting would need.
    for _ in range(100):
        page.wait_for_timeout(50)
        if page.evaluate("document.getElementById('sound').ended"):
            return
    raise TimeoutError("the clip does not end")


def inaccessible(page: Page) -> list[str]:
    page.evaluate(AXE.read_text("utf-8"))
    found = page.evaluate(f"axe.run({{runOnly: {RULES}}})")
    return [f"{one['id']}: {one['help']}" for one in found["violations"]]


def save(page: Page, place: Path) -> Path:
    with page.expect_download() as download:
        page.keyboard.press("Enter")
    path = place / download.value.suggested_filename
    download.value.save_as(path)
    return path


def current(page: Page) -> str:
    """Name of the clip that is on."""
    return Path(page.evaluate("document.getElementById('sound').src")).stem


@pytest.fixture(scope="module")
def given() -> dict[str, dict[str, int]]:
    """Votes by listener and clip, as they were given."""
    return {}


@pytest.mark.parametrize(("name", "bad"), [("Listener 7", 1), ("=1+1", 2)])
def test_a_listener_rates_by_keyboard_alone_and_saves(
    visit: Callable[..., Page],
    place: Path,
    key: dict[str, KeyRow],
    given: dict[str, dict[str, int]],
    name: str,
    bad: int,
) -> None:
    page = visit(accept_downloads=True)
    begin(page, name)
    assert page.evaluate("document.getElementById('sound').volume") == pytest.approx(0.15)
    votes: dict[str, int] = {}
    for number in range(1, 4):
        assert page.text_content("#which") == f"Clip {number} of 3"
        page.keyboard.press("5")
        assert page.text_content("#said") == "Listen to the end first."
        assert page.is_disabled("[name=vote][value='5']")
        listen(page)
        vote = bad if key[current(page)].packets_lost else 5
        votes[current(page)] = vote
        page.keyboard.press(str(vote))
        assert page.is_checked(f"[name=vote][value='{vote}']")
        if vote == bad:
            page.keyboard.press("c")
            page.keyboard.type('breaks up, "badly" 5')
            page.keyboard.press("Escape")
        page.keyboard.press("Enter")
    assert votes.keys() == key.keys()
    assert page.text_content("#ended") == "Thank you, that was all"
    page.keyboard.press("Tab")
    path = save(page, place)
    with open(path, newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert {row["clip"]: int(row["vote"]) for row in rows} == votes
    assert [int(row["place"]) for row in rows] == [1, 2, 3]
    assert {row["comment"] for row in rows} == {"", 'breaks up, "badly" 5'}
    assert {row["check"] for row in rows} == {next(iter(key.values())).check}
    given[name] = votes
    (place / "votes").mkdir(exist_ok=True)
    path.rename(place / "votes" / f"{len(given)}.csv")


def test_progress_is_kept_and_each_visit_starts_quietly(visit: Callable[..., Page]) -> None:
    page = visit()
    begin(page, "Ann")
    first = current(page)
    listen(page)
    page.keyboard.press("4")
    page.keyboard.press("Enter")
    page.evaluate(
        "const range = document.getElementById('volume'); range.value = 1; range.dispatchEvent(new Event('input'))"
    )
    assert page.evaluate("document.getElementById('sound').volume") == 1.0
    page.reload()
    ready(page)
    assert page.text_content("#which") == "Clip 2 of 3"
    assert page.evaluate("document.getElementById('sound').volume") == pytest.approx(0.15)
    page.keyboard.press("Backspace")
    assert current(page) == first
    assert page.is_checked("[name=vote][value='4']")


def test_clips_without_a_vote_are_told_at_the_end_and_lead_back(visit: Callable[..., Page]) -> None:
    page = visit()
    begin(page, "Ben")
    for _ in range(3):
        page.keyboard.press("Enter")
    assert page.text_content("#ended") == "Some clips are not rated yet"
    assert page.text_content("#missing") == "0 of 3 clips rated."
    page.keyboard.press("Tab")
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")
    assert page.text_content("#which") == "Clip 2 of 3"


def test_the_keys_can_be_turned_off(visit: Callable[..., Page]) -> None:
    page = visit()
    begin(page, "Cleo")
    page.focus("#keys")
    page.keyboard.press("Space")
    page.focus("#which")
    page.keyboard.press("Enter")
    assert page.text_content("#which") == "Clip 1 of 3"


def test_what_is_kept_can_be_forgotten(visit: Callable[..., Page]) -> None:
    page = visit()
    begin(page, "Dora")
    for _ in range(3):
        page.keyboard.press("Enter")
    page.focus("#forget")
    page.keyboard.press("Enter")
    assert page.evaluate("localStorage.length") == 0
    assert page.input_value("#listener") == ""


def test_each_listener_has_an_order_of_their_own(visit: Callable[..., Page], key: dict[str, KeyRow]) -> None:
    page = visit()
    orders = set()
    for number in range(10):
        begin(page, str(number))
        orders.add(tuple(page.evaluate("JSON.parse(Object.values(localStorage)[0]).order")))
        page.evaluate("localStorage.clear()")
        page.reload()
        ready(page)
    assert len(orders) > 1
    assert all(set(order) == set(key) for order in orders)


def test_a_clip_that_was_taken_out_is_told_and_passed_over(browser: Any, place: Path, key: dict[str, KeyRow]) -> None:
    shutil.copytree(place / "check" / "listeners", place / "thinned")
    for path in (place / "thinned" / "clips").iterdir():
        path.unlink()
    page = browser.new_page()
    page.goto((place / "thinned" / "rating-sheet.html").as_uri())
    begin(page, "Gil")
    page.keyboard.press("Space")
    page.wait_for_timeout(200)
    assert "cannot be played" in page.text_content("#said")
    page.keyboard.press("Enter")
    assert page.text_content("#which") == "Clip 2 of 3"
    page.close()


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_sheet_keeps_nobody_out(visit: Callable[..., Page], scheme: str) -> None:
    page = visit(color_scheme=scheme)
    assert not inaccessible(page)
    begin(page, "Eve")
    assert not inaccessible(page)
    listen(page)
    page.keyboard.press("3")
    assert not inaccessible(page)
    for _ in range(3):
        page.keyboard.press("Enter")
    assert not inaccessible(page)


def test_the_sheet_fits_a_telephone(visit: Callable[..., Page]) -> None:
    page = visit(viewport={"width": 360, "height": 740})
    begin(page, "Finn")
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")


def test_the_outcome_joins_the_saved_votes_with_the_key(
    command: Command, place: Path, key: dict[str, KeyRow], given: dict[str, dict[str, int]]
) -> None:
    if len(given) < 2:
        pytest.skip("nobody listened")
    result = command("listen", "--ratings", *sorted((place / "votes").glob("*.csv")), "--out", "outcome")
    assert result.returncode == 0, result.stderr
    assert "2 listeners, 3 clips, 6 votes" in result.stdout
    with open(place / "outcome" / "opinions.csv", newline="", encoding="utf-8") as file:
        rows = {row["clip"]: row for row in csv.DictReader(file)}
    for clip, row in rows.items():
        assert float(row["mean_opinion"]) == sum(votes[clip] for votes in given.values()) / 2
        assert float(row["predicted_mos"]) == pytest.approx(key[clip].predicted_mos, abs=1e-3)
    text = (place / "outcome" / "outcome.txt").read_text("utf-8")
    assert "Krippendorff" in text
    lossy = {clip for clip, row in key.items() if row.packets_lost}
    assert {line.split()[0] for line in text.splitlines()[-3:-1]} == lossy, "the worst opinion comes first"
