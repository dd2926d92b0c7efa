"""A time as people say it ("10:42", "2026-03-03 10:42:17"), and whether a call was going on then."""

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta, tzinfo

from rtpaudit.errors import UnusableArguments
from rtpaudit.units import NS_PER_S

MINUTE_NS = 60 * NS_PER_S
DAY_NS = 24 * 60 * MINUTE_NS

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_CLOCK = re.compile(r"T?(?P<clock>\d{1,2}:\d{2}(?P<seconds>:\d{2}([.,]\d{1,9})?)?)", re.ASCII)
_DATED = re.compile(
    r"(?P<day>\d{4}-\d{2}-\d{2})(?:[ T]+(?P<clock>\d{1,2}:\d{2}(?P<seconds>:\d{2}([.,]\d{1,9})?)?)"
    r"\s*(?P<offset>Z|[+-]\d{2}(?::?\d{2})?)?)?",
    re.ASCII | re.IGNORECASE,
)


@dataclass(frozen=True, slots=True)
class Moment:
    """A time of day or a time, with what its writer may have meant by it."""

    day: date | None
    """None for a time of day alone, whatever the day"""
    clock: time | None
    """None for a whole day"""
    zone: tzinfo | None
    """None for the machine's own"""
    before_ns: int
    after_ns: int
    """around the time that was written"""

    def distance_ns(self, from_ns: int, to_ns: int) -> int:
        """Time between this moment and what went on from ``from_ns`` to ``to_ns``; 0 where it was going on then."""
        spans = ((at - self.before_ns, at + self.after_ns) for at in self._times(from_ns, to_ns))
        return min(max(begin - to_ns, from_ns - end, 0) for begin, end in spans)

    def _times(self, from_ns: int, to_ns: int) -> list[int]:
        """What the text may name, near a span of time. A time that a change of the clocks repeats is two."""
        clock = self.clock or time()
        days = [self.day] if self.day is not None else self._days(from_ns, to_ns)
        local = [datetime.combine(day, clock.replace(fold=fold)) for day in days for fold in (0, 1)]
        return [_ns(moment.replace(tzinfo=self.zone) if self.zone else moment.astimezone()) for moment in local]

    def _days(self, from_ns: int, to_ns: int) -> list[date]:
        """Days near the begin of a span; what lasts longer than one meets every time of day on its first or second."""
        first = (_EPOCH + timedelta(microseconds=from_ns // 1000)).astimezone(self.zone).date()
        around = (-1, 0, 1, 2) if to_ns - from_ns > DAY_NS // 2 else (-1, 0, 1)
        return [first + timedelta(days=offset) for offset in around]


def parse_moment(text: str, zone: tzinfo | None = None) -> Moment:
    """A time of day, a time, or a day.

    Hours and minutes stand for a minute around them as well, since clocks on walls differ; seconds stand for that
    second. An offset in the text goes before the zone.

    Raises
    ------
    UnusableArguments
        Where the text is none of these.
    """
    found = _CLOCK.fullmatch(text.strip()) or _DATED.fullmatch(text.strip())
    if found is None:
        raise _refusal(text)
    said = found.groupdict()
    try:
        day = date.fromisoformat(said["day"]) if said.get("day") else None
        clock = _clock(said["clock"]) if said.get("clock") else None
        if said.get("offset"):
            zone = datetime.strptime(said["offset"].upper(), "%z").tzinfo
    except ValueError as fault:
        raise _refusal(text) from fault
    if day is not None and not date(1970, 1, 2) <= day <= date(9998, 12, 31):
        raise _refusal(text)
    if clock is None:
        return Moment(day, None, zone, 0, DAY_NS - 1)
    if said.get("seconds"):
        return Moment(day, clock, zone, 0, NS_PER_S - 1)
    return Moment(day, clock, zone, MINUTE_NS, MINUTE_NS)


def _clock(text: str) -> time:
    hours, rest = text.replace(",", ".").split(":", 1)
    whole, _, fraction = rest.partition(".")
    return time.fromisoformat(f"{int(hours):02d}:{whole}" + (f".{fraction[:6]:0<6}" if fraction else ""))


def _ns(moment: datetime) -> int:
    return (moment - _EPOCH) // timedelta(microseconds=1) * 1000


def _refusal(text: str) -> UnusableArguments:
    return UnusableArguments(f"{text!r} is no time; write it as in 10:42, 10:42:17 or 2026-03-03 10:42")
