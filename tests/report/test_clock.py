"""Times as the reader's clock has them."""

from zoneinfo import ZoneInfo

import pytest

from rtpaudit.report.clock import Clock

SUMMER_NS, WINTER_NS = (
    1_720_000_000_123_456_789,
    1_700_000_000_000_000_000,
)  # 2024-07-03 09:46:40, 2023-11-14 22:13:20 UTC


@pytest.mark.parametrize(
    ("zone", "time_ns", "told", "ahead_s", "name"),
    [
        ("Europe/Vienna", SUMMER_NS, "11:46:40", 7200, "Europe/Vienna, UTC+02:00"),
        ("Europe/Vienna", WINTER_NS, "23:13:20", 3600, "Europe/Vienna, UTC+01:00"),
        ("America/St_Johns", WINTER_NS, "18:43:20", -12600, "America/St_Johns, UTC-03:30"),
        ("UTC", WINTER_NS, "22:13:20", 0, "UTC"),
    ],
)
def test_the_zone_holds_at_the_moment_that_is_told(zone, time_ns, told, ahead_s, name) -> None:
    clock = Clock(ZoneInfo(zone))
    assert (clock.time_of_day(time_ns), clock.ahead_s(time_ns), clock.name(time_ns)) == (told, ahead_s, name)


def test_a_span_tells_the_day_once_where_it_is_one() -> None:
    clock = Clock(ZoneInfo("UTC"))
    assert clock.span(WINTER_NS, WINTER_NS + 60_000_000_000) == "2023-11-14 22:13:20 to 22:14:20"
    assert clock.span(WINTER_NS, WINTER_NS + 7200 * 10**9).endswith("to 2023-11-15 00:13:20")


def test_the_last_microsecond_is_not_rounded_into_the_next_second() -> None:
    assert Clock(ZoneInfo("UTC")).at(SUMMER_NS).microsecond == 123456
