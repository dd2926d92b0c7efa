"""At which end the capture was taken, by an address of one of the parties."""

import pytest

from rtpaudit.errors import UnusableArguments
from rtpaudit.media.calls import Call
from rtpaudit.media.near import note_near_ends
from tests.media.made_calls import call, party, term


def calls() -> list[Call]:
    return [
        call(
            1, party("0142", "192.0.2.10"), party("0143", "198.51.100.1"), 0, 60, media=[term("callee", "192.0.2.99")]
        ),
        call(2, party("0144", "198.51.100.1"), party("0142", "192.0.2.10"), 100, 160),
        call(3, party("0145", "203.0.113.1"), party("0146", "203.0.113.2"), 200, 260),
    ]


@pytest.mark.parametrize(
    ("near", "sides"),
    [
        ("192.0.2.10", ["caller", "callee", "unknown"]),
        ("192.0.2.99", ["callee", "unknown", "unknown"]),
        ("198.51.100.0/24", ["callee", "caller", "unknown"]),
        ("192.0.2.0/24", ["unknown", "callee", "unknown"]),
    ],
)
def test_the_side_that_has_the_address_is_near(near: str, sides: list[str]) -> None:
    found = calls()
    note_near_ends(found, near)
    assert [one.near for one in found] == sides


@pytest.mark.parametrize("near", ["192.0.2.11", "203.0.113.0/24", "2001:db8::1"])
def test_an_address_that_is_no_calls_end_is_refused(near: str) -> None:
    with pytest.raises(UnusableArguments, match="no call has just one end"):
        note_near_ends(calls(), near)


@pytest.mark.parametrize("near", ["", "pbx", "192.0.2.1/99", "300.1.1.1"])
def test_what_is_no_address_is_refused(near: str) -> None:
    with pytest.raises(UnusableArguments, match="no address"):
        note_near_ends(calls(), near)


def test_where_there_is_no_call_any_address_will_do() -> None:
    note_near_ends([], "192.0.2.10")
