"""The terminal: strangers' text made safe, and a bar only where somebody watches long work."""

import sys

import pytest

from rtpaudit.cli import terminal
from rtpaudit.cli.terminal import Bar, bold, visible, width


@pytest.mark.parametrize("text", ["plain", "ünïcode ☎", "Ω", "日本語", "a → b"])
def test_what_can_be_seen_stays(text: str) -> None:
    assert visible(text) == text


@pytest.mark.parametrize("text", ["\x1b[2J", "\a", "\r", "\n", "\t", "\x9b31m", "\u202e", "\u200b", "\ud800"])
def test_what_steers_a_terminal_is_replaced(text: str) -> None:
    assert visible(text)[0] == "\ufffd"


def test_into_a_pipe_there_is_no_colour_and_80_columns() -> None:
    assert bold("c01") == "c01"
    assert width() == 80


@pytest.mark.parametrize(("columns", "taken"), [("200", 100), ("80", 80), ("20", 60)])
def test_a_terminal_is_used_within_reason(columns: str, taken: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys.stdout, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("COLUMNS", columns)
    assert width() == taken


def test_colour_is_left_out_where_the_user_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys.stdout, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.delenv("NO_COLOR", raising=False)
    assert bold("c01") == "\x1b[1mc01\x1b[0m"
    monkeypatch.setenv("NO_COLOR", "1")
    assert bold("c01") == "c01"


@pytest.fixture
def started(monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Names of the bars that were drawn."""
    drawn: list[str] = []

    class Progress:
        def start(self) -> None: ...

        def stop(self) -> None:
            drawn.append("stopped")

        def add_task(self, what: str, total: int) -> int:
            drawn.append(f"{what} of {total}")
            return len(drawn)

        def update(self, _task: int, completed: int) -> None:
            drawn.append(str(completed))

    monkeypatch.setattr(terminal, "_bar", Progress)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    return drawn


def test_long_work_shows_a_bar_that_goes_away(started: list[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(terminal, "PATIENCE_S", 0.0)
    with Bar(shown=True) as bar:
        bar.reading(10, 100)
        bar.reading(20, 100)
        bar.writing(1, 4)
    assert started == ["Reading of 100", "10", "20", "Writing the report of 4", "1", "stopped"]


def test_short_work_shows_none(started: list[str]) -> None:
    with Bar(shown=True) as bar:
        bar.reading(10, 100)
    assert started == []


def test_quiet_work_shows_none(started: list[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(terminal, "PATIENCE_S", 0.0)
    with Bar(shown=False) as bar:
        bar.reading(10, 100)
    assert started == []


def test_into_a_pipe_there_is_no_bar(started: list[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(terminal, "PATIENCE_S", 0.0)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: False, raising=False)
    with Bar(shown=True) as bar:
        bar.reading(10, 100)
    assert started == []


def test_the_real_bar_can_be_drawn(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(terminal, "PATIENCE_S", 0.0)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    with Bar(shown=True) as bar:
        bar.reading(1, 2)
