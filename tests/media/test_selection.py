"""Calls chosen as people know them, among five made by hand."""

import pytest

from rtpaudit.errors import NothingChosen, UnusableArguments
from rtpaudit.media.selection import Selection, chosen
from rtpaudit.signalling.calls import Transfer
from tests.media.made_calls import call, party, term

CALLS = [
    call(1, party("0142", "192.0.2.10"), party("ferry.desk", "198.51.100.1"), 0, 60),
    call(
        2,
        party("+441632960142", "192.0.2.11", display_name="Ann Öhm", asserted_identity="tel:+44-1632-960199"),
        party("01632960101", "198.51.100.1"),
        30,
        300,
        diversions=["sip:harbour@example.com"],
        media=[term("caller", "192.0.2.77")],
    ),
    call(3, "192.0.2.30", "2001:db8::30", 400, 500),
    call(
        4,
        party("0143", "192.0.2.10"),
        party("ferry.desk", "198.51.100.1"),
        700,
        760,
        transfers=[Transfer(0, "caller", "sip:pier7@example.com")],
    ),
    call(5, party("anonymous", "192.0.2.1"), party("960142", "198.51.100.9"), 1000, 1200),
]


def ids(**wanted: object) -> list[str]:
    return [one.id for one in chosen(CALLS, Selection(**wanted))]  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("0142", ["c01", "c02", "c05"]),
        ("FERRY", ["c01", "c04"]),
        ("sip:ferry.desk@198.51.100.1", ["c01", "c04"]),
        ("ann öhm", ["c02"]),
        ("harbour", ["c02"]),
        ("pier7", ["c04"]),
        ("+44 1632 960199", ["c02"]),
        ("01632 960 199", ["c02"]),
        ("192.0.2.77", ["c02"]),
        ("192.0.2.1", ["c05"]),
        ("192.0.2", ["c01", "c02", "c03", "c04", "c05"]),
        ("2001:0DB8:0:0::30", ["c03"]),
        ("[2001:db8::30]", ["c03"]),
    ],
)
def test_a_party_is_found_by_number_uri_name_or_address(text: str, found: list[str]) -> None:
    assert ids(parties=(text,)) == found


def test_a_whole_number_finds_its_extension_too() -> None:
    assert ids(parties=("+441632960142",)) == ["c02", "c05"]


def test_two_parties_have_both_to_be_in_the_call() -> None:
    assert ids(parties=("ferry.desk", "0143")) == ["c04"]


def test_a_time_and_a_party_together_name_one_call() -> None:
    assert ids(parties=("ferry.desk",), at="2026-03-03T10:42:30Z") == ["c01"]


def test_hours_and_minutes_mean_a_minute_around_as_well() -> None:
    assert ids(at="2026-03-03T10:48Z") == ["c02", "c03"]
    assert ids(at="2026-03-03T10:48:50Z") == ["c03"]


@pytest.mark.parametrize("text", ["c04", "C4", "c004", " c04 ", "dialog-4@example.com"])
def test_a_call_is_named_by_our_id_or_by_its_dialog(text: str) -> None:
    assert ids(calls=(text,)) == ["c04"]


def test_several_calls_may_be_named() -> None:
    assert ids(calls=("c05", "c01")) == ["c01", "c05"]


def test_nothing_said_chooses_nothing_out() -> None:
    assert not Selection()
    assert Selection(at="10:42")


def nearest(**wanted: object) -> list[str]:
    with pytest.raises(NothingChosen) as caught:
        ids(**wanted)
    return [one.id for one in caught.value.nearest]


def test_where_nothing_fits_the_nearest_in_time_are_named() -> None:
    assert nearest(at="2026-03-03T10:53:00Z")[:3] == ["c04", "c03", "c05"]


def test_where_nobody_fits_those_with_the_likest_names_are_named() -> None:
    assert set(nearest(parties=("fery desk",))[:2]) == {"c01", "c04"}


def test_what_fits_in_part_comes_before_what_does_not_at_all() -> None:
    assert nearest(parties=("ferry.desk",), at="2026-03-03T11:30:00Z")[:2] == ["c04", "c01"]


def test_a_named_call_that_is_not_there_is_an_error_even_beside_one_that_is() -> None:
    with pytest.raises(NothingChosen, match="there is no call 'c06'") as caught:
        ids(calls=("c01", "c06"))
    assert caught.value.missing == ["c06"]
    assert caught.value.nearest


def test_of_no_calls_none_is_near() -> None:
    with pytest.raises(NothingChosen, match="no call"):
        chosen([], Selection(parties=("0142",)))


@pytest.mark.parametrize("wanted", [{"parties": ("",)}, {"parties": (" ",)}, {"calls": ("",)}])
def test_an_empty_text_is_refused(wanted: dict[str, tuple[str, ...]]) -> None:
    with pytest.raises(UnusableArguments, match="empty"):
        Selection(**wanted)
