"""Times as the reader's clock has them: the zone by name, and how far it is ahead of UTC at a moment."""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, tzinfo

from rtpaudit.units import NS_PER_S

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


@dataclass(frozen=True, slots=True)
class Clock:
    """The clock that people read."""

    zone: tzinfo | None
    """None for the machine's own"""

    def at(self, time_ns: int) -> datetime:
        """Local time of a moment, to the microsecond."""
        return (EPOCH + timedelta(microseconds=time_ns // 1000)).astimezone(self.zone)

    def time_of_day(self, time_ns: int) -> str:
        """Hours, minutes and seconds."""
        return f"{self.at(time_ns):%H:%M:%S}"

    def ahead_s(self, time_ns: int) -> int:
        """By how much local time is ahead of UTC. [s]"""
        ahead = self.at(time_ns).utcoffset()
        return 0 if ahead is None else round(ahead.total_seconds())

    def name(self, time_ns: int) -> str:
        """The zone by its name, with the distance from UTC where the name does not say it."""
        moment = self.at(time_ns)
        name = str(self.zone) if self.zone is not None else moment.tzname() or "local time"
        ahead = f"{moment:%z}"
        return name if name == "UTC" else f"{name}, UTC{ahead[:3]}:{ahead[3:5]}"

    def span(self, begin_ns: int, end_ns: int) -> str:
        """From when to when, the day once where it is one."""
        begin, end = self.at(begin_ns), self.at(end_ns)
        until = f"{end:%H:%M:%S}" if begin.date() == end.date() else f"{end:%Y-%m-%d %H:%M:%S}"
        return f"{begin:%Y-%m-%d %H:%M:%S} to {until}"


def seconds_ns(seconds: float) -> int:
    """Seconds as nanoseconds."""
    return round(seconds * NS_PER_S)
