"""How a nightly run tells of itself: a line a minute in a log, and amounts as people write them."""

import pytest

from rtpaudit.cli import nightly
from rtpaudit.cli.nightly import Watch
from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.batch import Progress

HALF = Progress(captures=1000, octets=4_000_000, captures_done=500, octets_done=2_000_000, calls=500, failed=3)


def test_a_log_gets_a_line_a_minute_with_rate_and_time_left(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    clock = [0.0]
    monkeypatch.setattr(nightly.time, "monotonic", lambda: clock[0])
    watch = Watch(shown=True)
    for clock[0] in (1.0, 59.0, 60.0, 61.0, 119.0, 120.0, 121.0):
        watch.told(HALF)
    watch.close()
    lines = capsys.readouterr().err.splitlines()
    assert lines == [
        "rtpaudit: 500 of 1,000 captures, 8/s, 1 min left, 3 failed",
        "rtpaudit: 500 of 1,000 captures, 4/s, 2 min left, 3 failed",
    ]


def test_nothing_is_told_where_nothing_is_wanted_or_to_do(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(nightly, "LINE_EVERY_S", 0.0)
    Watch(shown=False).told(HALF)
    Watch(shown=True).told(Progress())
    assert capsys.readouterr().err == ""


@pytest.mark.parametrize(("text", "octets"), [("800M", 800 << 20), ("4G", 4 << 30), ("4g", 4 << 30), ("123", 123)])
def test_memory_is_written_as_people_do(text: str, octets: int) -> None:
    assert nightly._octets(text) == octets


@pytest.mark.parametrize("text", ["", "G", "4X", "-4G", "0", "4.5G", "lots"])
def test_memory_that_is_none_is_refused(text: str) -> None:
    with pytest.raises(UnusableArguments, match="--memory"):
        nightly._octets(text)
