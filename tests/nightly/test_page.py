"""The morning page: hostile names stay text, empty nights say so, lines say what they show."""

import re
from datetime import date, timedelta
from pathlib import Path

import pytest

from rtpaudit.errors import UnusableHistory
from rtpaudit.nightly.lines import trend_line
from rtpaudit.nightly.morning import mornings
from rtpaudit.nightly.run import show_all
from rtpaudit.nightly.settings import NAMES_KEPT, AuditSettings
from rtpaudit.nightly.store import Store
from rtpaudit.profile import Profile, Route
from tests.nightly.made import call_octets
from tests.nightly.runs import UTC, InThisProcess, run

NASTY = "<script>alert(1)</script>&\"'"
NIGHT = date(2026, 3, 1)


@pytest.fixture(scope="module")
def store(tmp_path_factory: pytest.TempPathFactory) -> Store:
    place = tmp_path_factory.mktemp("page")
    (place / "in").mkdir()
    (place / "in" / f"{NASTY.replace('/', '')}.pcap").write_bytes(call_octets(1, 2.0, loss=0.2))
    (place / "in" / "cut<b>.pcap").write_bytes(bytes.fromhex("d4c3b2a1"))
    profile = Profile(routes=(Route(NASTY, addresses=("0.0.0.0/0",)),))
    settings = AuditSettings(profile=profile, zone="UTC", names=NAMES_KEPT, profile_mark="p")
    run(place / "store", [place / "in"], InThisProcess(settings=settings), settings)
    return Store.open(place / "store")


def test_names_from_captures_and_profiles_are_text(store: Store) -> None:
    show_all(store.folder, UTC, None)
    pages = [path.read_text("utf-8") for path in store.folder.glob("night=*/index.html")]
    assert pages
    assert not any("<script" in page or "<b>" in re.sub(r"<style>.*?</style>", "", page, flags=re.S) for page in pages)
    assert any("&lt;script&gt;alert(1)" in page for page in pages)


def test_a_page_reaches_out_to_nothing(store: Store) -> None:
    show_all(store.folder, UTC, None)
    for path in store.folder.glob("night=*/index.html"):
        page = path.read_text("utf-8")
        assert "default-src 'none'" in page
        assert not re.search(r"""(?:src|href)=["']?(?:https?:)?//""", page)


def test_a_first_night_says_that_there_is_nothing_to_compare_with(store: Store) -> None:
    (morning,) = mornings(store, [NIGHT], UTC, None)
    show_all(store.folder, UTC, None)
    page = (store.night_folder(NIGHT) / "index.html").read_text("utf-8")
    assert "There is no night before to compare with." in page
    assert "too few nights or calls to tell changes from chance" in page
    assert morning.traffic is not None


def test_a_line_breaks_where_nights_are_missing() -> None:
    nights = [NIGHT + timedelta(days=k) for k in (0, 1, 2, 4, 6, 7)]
    line = trend_line("median R", "", nights, [90.0, 91.0, 90.0, 89.0, 88.0, 92.0])
    assert line is not None
    assert [piece.count(",") for piece in line.pieces] == [3, 2]
    assert len(line.dots) == 1
    assert (line.high, line.low, line.first_night, line.last_night) == ("92", "88", "2026-03-01", "2026-03-08")
    assert line.told == "median R: 92 in the last night, 89.6 on average over 5 nights before, between 88 and 92"


def test_a_line_of_one_level_is_drawn_in_the_middle() -> None:
    line = trend_line("failed", "%", [NIGHT, NIGHT + timedelta(days=1)], [0.0, 0.0])
    assert line is not None
    assert line.low == ""
    assert {point.split(",")[1] for point in line.pieces[0].split()} == {"36.0"}


def test_one_night_is_no_line() -> None:
    assert trend_line("median R", "", [NIGHT], [90.0]) is None
    assert trend_line("median R", "", [NIGHT, NIGHT], [90.0, float("nan")]) is None


def test_a_store_without_nights_is_told(tmp_path: Path) -> None:
    Store.open(tmp_path / "store", create=True)
    with pytest.raises(UnusableHistory, match="holds no night yet"):
        show_all(tmp_path / "store", UTC, None)
