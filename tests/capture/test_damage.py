"""Notes of damage stay few, and harmless to print."""

import pytest

from rtpaudit.capture.damage import MOST_ROWS, DamageLog, octets_text, printable


def test_rows_come_in_the_order_met() -> None:
    log = DamageLog("a.pcap")
    log.add(5, "this", "that")
    log.add(3, "more", "less")
    assert [(row.capture, row.offset, row.what, row.lost) for row in log.rows] == [
        ("a.pcap", 5, "this", "that"),
        ("a.pcap", 3, "more", "less"),
    ]


@pytest.mark.parametrize("further", [1, 2, 5000])
def test_a_great_many_are_summed_up_in_the_last(further: int) -> None:
    log = DamageLog("a.pcap")
    for offset in range(MOST_ROWS + further):
        log.add(offset, "this", "that")
    assert len(log.rows) == MOST_ROWS + 1
    assert (log.rows[-1].offset, log.rows[-1].what) == (MOST_ROWS, f"{further} more damaged places from here on")


def test_octets_are_counted_in_words() -> None:
    assert [octets_text(count) for count in (0, 1, 12_345)] == ["0 octets", "1 octet", "12,345 octets"]


def test_names_lose_what_steers_a_terminal_and_what_utf_8_cannot_hold() -> None:
    assert printable("leitstand grün.pcap") == "leitstand grün.pcap"
    assert printable("\x1b[31mred\n\u202e\udc80") == "\\x1b[31mred\\n\\u202e\\udc80"
