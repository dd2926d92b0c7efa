"""Nights: noon to noon by the clock on the wall, also where that clock is put forward or back."""

from datetime import UTC, date, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from rtpaudit.nightly.calendar import hours_of, night_of, nights_of, noon_ns

VIENNA = ZoneInfo("Europe/Vienna")


def ns(text: str) -> int:
    return round(datetime.fromisoformat(text).replace(tzinfo=UTC).timestamp()) * 1_000_000_000


@pytest.mark.parametrize(
    ("moment", "zone", "night"),
    [
        ("2026-03-01T12:00:00", UTC, "2026-03-01"),
        ("2026-03-02T11:59:59", UTC, "2026-03-01"),
        ("2026-03-02T12:00:00", UTC, "2026-03-02"),
        ("2026-03-02T10:59:59", VIENNA, "2026-03-01"),
        ("2026-03-02T11:00:00", VIENNA, "2026-03-02"),
        # Summer time begins on 29 March: noon is at 10 UTC from then on.
        ("2026-03-29T09:59:59", VIENNA, "2026-03-28"),
        ("2026-03-29T10:00:00", VIENNA, "2026-03-29"),
        ("2026-10-25T10:59:59", VIENNA, "2026-10-24"),
        ("1970-01-01T00:00:00", UTC, "1969-12-31"),
    ],
)
def test_a_night_begins_at_noon(moment: str, zone: ZoneInfo, night: str) -> None:
    assert night_of(ns(moment), zone) == date.fromisoformat(night)
    nights, place = nights_of(np.array([ns(moment)]), zone)
    assert nights[place[0]] == date.fromisoformat(night)
    assert night_of(noon_ns(date.fromisoformat(night), zone), zone) == date.fromisoformat(night)
    assert night_of(noon_ns(date.fromisoformat(night), zone) - 1_000_000_000, zone) < date.fromisoformat(night)


def test_many_moments_are_placed_as_each_alone() -> None:
    moments = ns("2026-03-27T00:00:00") + np.arange(0, 5 * 86_400, 811) * 1_000_000_000
    nights, place = nights_of(moments, VIENNA)
    assert [nights[one] for one in place] == [night_of(int(one), VIENNA) for one in moments]
    told = [datetime.fromtimestamp(int(one) // 10**9, UTC).astimezone(VIENNA).hour for one in moments]
    assert hours_of(moments, VIENNA).tolist() == told


def test_no_moments_make_no_nights() -> None:
    assert nights_of(np.empty(0, np.int64), UTC)[0] == []
