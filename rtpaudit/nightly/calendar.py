"""Nights: from noon to noon in a time zone, called by the date on which they begin."""

from collections.abc import Callable
from datetime import UTC, date, datetime, time, timedelta, tzinfo
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

NS_PER_S = 1_000_000_000
_NOON = time(12)
# Offsets of time zones are whole quarters of an hour in our days, so that both kinds of change fall between quarters.
_QUARTER_S = 900

T = TypeVar("T")


def night_of(time_ns: int, zone: tzinfo | None) -> date:
    """Night of a moment."""
    return _night(datetime.fromtimestamp(time_ns // NS_PER_S, UTC).astimezone(zone))


def nights_of(times_ns: NDArray[np.int64], zone: tzinfo | None) -> tuple[list[date], NDArray[np.int64]]:
    """The nights in which moments lie, in order, and for each moment the place of its night among them."""
    return _by_quarter(times_ns, zone, _night)


def hours_of(times_ns: NDArray[np.int64], zone: tzinfo | None) -> NDArray[np.int64]:
    """Hour of the day, 0 to 23, by the clock on the wall."""
    hours, place = _by_quarter(times_ns, zone, lambda moment: moment.hour)
    return np.array(hours, np.int64)[place]


def noon_ns(day: date, zone: tzinfo | None) -> int:
    """The noon of a day, which begins its night. [ns since 1970]"""
    noon = datetime.combine(day, _NOON)
    aware = noon.astimezone() if zone is None else noon.replace(tzinfo=zone)
    return round(aware.timestamp()) * NS_PER_S


def _night(moment: datetime) -> date:
    return moment.date() if moment.time() >= _NOON else moment.date() - timedelta(days=1)


def _by_quarter(
    times_ns: NDArray[np.int64], zone: tzinfo | None, told: Callable[[datetime], T]
) -> tuple[list[T], NDArray[np.int64]]:
    """What ``told`` says of each moment, asked once for every quarter of an hour: the answers in order, and which."""
    quarters, place = np.unique(times_ns // (_QUARTER_S * NS_PER_S), return_inverse=True)
    said = [told(datetime.fromtimestamp(int(one) * _QUARTER_S, UTC).astimezone(zone)) for one in quarters]
    answers = sorted(set(said))  # type: ignore[type-var]
    places = {answer: k for k, answer in enumerate(answers)}
    return answers, np.array([places[one] for one in said], np.int64)[place]
