"""The morning page in headless Chromium: opened from disk, at desk and phone width, by day and by night."""

import shutil
from collections.abc import Iterator
from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rtpaudit.nightly.limits import Limits
from rtpaudit.nightly.run import show_all
from rtpaudit.nightly.store import Store
from tests.journeys.conftest import CAPTURES
from tests.nightly.made import START_NS, call_octets
from tests.nightly.runs import UTC, run

sync_api = pytest.importorskip("playwright.sync_api", reason="playwright drives the browser, and is not installed")
CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="chromium is not installed")

AXE = CAPTURES.parents[0] / "axe" / "axe.min.js"
DAY_NS = 86_400_000_000_000
DESK, PHONE = {"width": 1440, "height": 1000}, {"width": 390, "height": 844}


@pytest.fixture(scope="module")
def page_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three nights of few calls, with a limit that the last breaks."""
    place = tmp_path_factory.mktemp("morning")
    (place / "in").mkdir()
    draw = np.random.default_rng(1)
    for night in range(3):
        for k in range(6):
            start = START_NS + night * DAY_NS + k * 600_000_000_000
            octets = call_octets(int(draw.integers(2**31)), 1.0, start_ns=start, loss=0.02 * night)
            (place / "in" / f"{night}-{k}.pcap").write_bytes(octets)
    run(place / "store", [place / "in"])
    mornings = show_all(place / "store", UTC, Limits.from_table({"all": {"least_calls": 100, "r_median": 10}}))
    night = mornings[-1].night.night
    assert Store.open(place / "store").nights() == [night - timedelta(days=k) for k in (2, 1, 0)]
    return place / "store" / f"night={night}" / "index.html"


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    with sync_api.sync_playwright() as driver:
        chromium = driver.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox", "--no-first-run"])
        yield chromium
        chromium.close()


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("viewport", [DESK, PHONE], ids=["desk", "phone"])
def test_the_page_keeps_nobody_out_and_asks_no_network(
    browser: Any, page_file: Path, viewport: dict[str, int], scheme: str
) -> None:
    asked: list[str] = []
    context = browser.new_context(viewport=viewport, color_scheme=scheme, bypass_csp=True)
    try:
        page = context.new_page()
        page.on("request", lambda request: asked.append(request.url))
        page.goto(page_file.as_uri())
        assert asked == [page_file.as_uri()]
        wide = page.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
        assert wide <= 0, "the page scrolls sideways"
        page.add_script_tag(path=str(AXE))
        found = page.evaluate("axe.run({runOnly: ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'best-practice']})")
        assert not [(one["id"], [node["html"] for node in one["nodes"]]) for one in found["violations"]]
    finally:
        context.close()


def test_the_broken_limit_is_the_first_thing_to_read_and_nights_are_linked(browser: Any, page_file: Path) -> None:
    context = browser.new_context(viewport=DESK)
    try:
        page = context.new_page()
        page.goto(page_file.as_uri())
        first = page.locator(".limits li").first
        assert first.inner_text().startswith("Broken. all: least_calls is 6, the limit is 100")
        assert first.bounding_box()["y"] < DESK["height"]
        assert page.locator("svg").count() >= 3
        page.locator("nav a").first.click()
        assert page.title() == "Night of 2026-03-02: audit"
    finally:
        context.close()
