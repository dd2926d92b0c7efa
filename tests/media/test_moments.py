"""Times as people say them, against spans of time counted by hand."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import UnusableArguments
from rtpaudit.media.moments import parse_moment

S = 1_000_000_000
OSLO = ZoneInfo("Europe/Oslo")


def ns(text: str) -> int:
    return round(datetime.fromisoformat(text).replace(tzinfo=UTC).timestamp()) * S


BEGIN, END = ns("2026-03-03 10:41:30"), ns("2026-03-03 10:44:00")
"""of a call"""


@pytest.mark.parametrize(
    "text",
    [
        "10:42", "T10:42", "10:42:17", "10:42:17.5", "10:42:17,500", "10:45", "10:41",
        "2026-03-03 10:42", "2026-03-03T10:42:17", "2026-03-03 10:42:17Z", "2026-03-03T11:42+01:00",
        "2026-03-03 05:42-0500", "2026-03-03", " 10:42 ",
    ],
)  # fmt: skip
def test_the_call_was_going_on_then(text: str) -> None:
    assert parse_moment(text, UTC).distance_ns(BEGIN, END) == 0


@pytest.mark.parametrize(
    ("text", "away_s"),
    [
        ("10:41:29", 0), ("10:41:28", 1), ("10:40:00", 89), ("10:44:01", 1), ("10:46", 60), ("10:39", 90),
        ("2026-03-04 10:42", 24 * 3600 - 60 - 120), ("2026-03-02", 10 * 3600 + 41 * 60 + 30),
        ("2026-03-03T10:42+01:00", 3600 - 30 - 60),
    ],
)  # fmt: skip
def test_how_far_it_was_from_going_on(text: str, away_s: int) -> None:
    assert parse_moment(text, UTC).distance_ns(BEGIN, END) // S == away_s


def test_a_time_of_day_is_meant_in_the_zone() -> None:
    assert parse_moment("11:42", OSLO).distance_ns(BEGIN, END) == 0
    assert parse_moment("10:42", OSLO).distance_ns(BEGIN, END) > 0


def test_a_time_of_day_holds_for_whatever_day() -> None:
    day = 24 * 3600 * S
    assert all(parse_moment("10:42", UTC).distance_ns(BEGIN + k * day, END + k * day) == 0 for k in range(-800, 800))


def test_a_call_over_midnight_was_going_on_on_both_sides_of_it() -> None:
    begin, end = ns("2026-03-03 23:50:00"), ns("2026-03-04 00:20:00")
    for text in ("23:55", "00:10", "2026-03-04 00:10", "2026-03-03", "2026-03-04"):
        assert parse_moment(text, UTC).distance_ns(begin, end) == 0


def test_a_call_of_three_days_meets_every_time_of_day() -> None:
    begin = ns("2026-03-03 10:00:00")
    for text in ("09:00", "10:30", "23:59", "00:00"):
        assert parse_moment(text, UTC).distance_ns(begin, begin + 72 * 3600 * S) == 0


def test_an_hour_that_the_clocks_repeat_is_two() -> None:
    """02:30 on 25 October 2026 in Oslo is 00:30 and 01:30 UTC."""
    for begin in ("2026-10-25 00:29:00", "2026-10-25 01:29:00"):
        assert parse_moment("2026-10-25 02:30", OSLO).distance_ns(ns(begin), ns(begin) + 120 * S) == 0


@pytest.mark.parametrize(
    "text",
    ["", "now", "10", "25:00", "10:60", "10:42:61", "2026-13-01", "2026-02-30 10:00", "0001-01-01 00:00", "10:42 pm",
     "9999-12-31 23:59", "10:42Z", "2026-03-03 10", "٣:٤٢"],
)  # fmt: skip
def test_what_is_no_time_is_refused_with_an_example(text: str) -> None:
    with pytest.raises(UnusableArguments, match="10:42"):
        parse_moment(text, UTC)


@given(st.text(alphabet="0123456789:-T Z+.,", max_size=30), st.integers(0, 1 << 62), st.integers(0, 1 << 62))
def test_any_text_is_a_time_or_refused(text: str, one: int, other: int) -> None:
    try:
        moment = parse_moment(text, OSLO)
    except UnusableArguments:
        return
    assert moment.distance_ns(min(one, other), max(one, other)) >= 0
