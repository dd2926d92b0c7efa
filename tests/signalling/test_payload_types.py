import csv
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import UnusableArguments
from rtpaudit.signalling.payload_types import STATIC, Encoding, encoding, parse_given

TABLE = Path(__file__).parents[1] / "published" / "rtp_payload_types.csv"


def printed_rows() -> dict[int, dict[str, str]]:
    """RFC 3551 tables 4 and 5, row by payload type; the ranges from 35 on name no encoding."""
    with TABLE.open() as lines:
        return {int(row["payload_type"]): row for row in csv.DictReader(lines) if "-" not in row["payload_type"]}


@pytest.mark.parametrize("number", range(35))
def test_static_types_are_those_of_rfc_3551_tables_4_and_5(number: int) -> None:
    row = printed_rows()[number]
    if row["encoding"] in ("reserved", "unassigned"):
        assert number not in STATIC
        return
    made = STATIC[number]
    assert made.name == row["encoding"]
    assert made.clock_rate_hz == int(row["clock_hz"])
    assert made.media == {"A": "audio", "V": "video", "AV": "video"}[row["media"]]
    if row["channels"]:
        assert made.channels == int(row["channels"])


def test_no_static_type_lies_beyond_the_printed_tables() -> None:
    assert max(STATIC) == 34


def test_g722_samples_at_twice_its_clock_as_rfc_3551_4_5_2_says() -> None:
    assert STATIC[9] == Encoding("G722", clock_rate_hz=8000, sampling_rate_hz=16000)


def test_g722_announced_with_its_sampling_rate_keeps_the_clock_of_the_rfc() -> None:
    assert encoding("g722", 16000).clock_rate_hz == 8000


def test_opus_runs_at_48_khz_with_two_channels_as_rfc_7587_7_says() -> None:
    assert parse_given("111=OPUS/48000/2") == (111, Encoding("opus", 48000, 48000, 2))


def test_the_given_encoding_takes_the_registered_spelling() -> None:
    assert parse_given("96=g722/8000") == (96, Encoding("G722", 8000, 16000))
    assert parse_given(" 97 = ilbc/8000 ") == (97, Encoding("iLBC", 8000, 8000))


def test_an_encoding_that_nobody_registered_is_taken_as_written() -> None:
    assert parse_given("100=x-Desk/24000/2") == (100, Encoding("x-Desk", 24000, 24000, 2))


def test_the_clock_may_be_left_out_where_the_format_fixes_it() -> None:
    assert parse_given("98=AMR-WB") == (98, Encoding("AMR-WB", 16000, 16000))


NONSENSE = [
    *("", "96", "96=", "=G722/8000", "x=G722/8000", "96=PC MU/8000", "\u0663=PCMU/8000"),
    *("128=PCMU/8000", "-1=PCMU/8000", "72=PCMU/8000"),
    *("96=PCMU", "96=PCMU/0", "96=G722/16000", "96=opus/8000", "96=PCMU/8000/0", "96=PCMU/8000/1/1"),
]


@pytest.mark.parametrize("text", NONSENSE)
def test_nonsense_is_refused_with_a_sentence_that_names_it(text: str) -> None:
    with pytest.raises(UnusableArguments, match="payload type"):
        parse_given(text)


@given(st.text(max_size=40))
def test_any_text_is_either_understood_or_refused(text: str) -> None:
    try:
        number, made = parse_given(text)
    except UnusableArguments:
        return
    assert 0 <= number <= 127
    assert made.clock_rate_hz > 0


@given(st.integers(0, 127).filter(lambda n: not 72 <= n <= 76), st.integers(1, 192_000))
def test_what_is_given_is_what_is_used(number: int, clock_rate_hz: int) -> None:
    assert parse_given(f"{number}=L16/{clock_rate_hz}/2") == (number, Encoding("L16", clock_rate_hz, clock_rate_hz, 2))
