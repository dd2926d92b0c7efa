"""The account of a stream's numbers: against print, against a slow twin, by hand, and under forged numbers."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.loss import in_sequence, missing_runs, received_mask
from rtpaudit.serial import unwrap
from tests.metrics.streams import by_numbers, streams
from tests.naive import loss as naive
from tests.published import published_rows

QUANTITIES = {
    "received": "captured",
    "unique": "received",
    "duplicates": "duplicated",
    "expected": "expected",
    "lost": "lost",
    "reordered": "reordered",
}
"""name in the published table to name here: there, copies count as received"""

PRINTED = [row for row in published_rows("sequence_and_delay") if row["quantity"] in QUANTITIES]


def sequence_of(numbers):
    one = by_numbers(numbers)
    return in_sequence(one.extended, one.segment, one.duplicate)


@pytest.mark.parametrize("row", PRINTED, ids=lambda row: row["id"])
def test_printed_sequences_are_counted_as_by_the_rfcs(row) -> None:
    """RFC 3550 A.3 and RFC 4737 3.3, the latter with its two examples of Table 1 and 2."""
    numbers = np.array(row["inputs"].removeprefix("seq=").split(), np.uint16)
    found = sequence_of(unwrap(numbers, 16))
    assert getattr(found, QUANTITIES[row["quantity"]]) == int(row["expected"])


@settings(max_examples=150, deadline=None)
@given(streams())
def test_every_count_is_that_of_a_plain_loop(one) -> None:
    plain = one.lists()
    wanted = naive.account(plain.extended, plain.segment, plain.duplicate)
    found = in_sequence(one.extended, one.segment, one.duplicate)
    names = ["segments", "captured", "received", "expected", "lost", "duplicated", "reordered"]
    assert {name: getattr(found, name) for name in names} == {name: wanted[name] for name in names}
    lengths = [length for _, _, length in wanted["runs"]]
    assert (found.gaps, found.longest_gap) == (len(lengths), max(lengths, default=0))
    assert received_mask(found).tolist() == naive.mask(plain.extended, plain.segment, plain.duplicate)


@settings(max_examples=150, deadline=None)
@given(streams())
def test_every_run_lies_between_the_packets_that_a_plain_loop_finds(one) -> None:
    plain = one.lists()
    columns = plain.extended, plain.segment, plain.duplicate
    found = missing_runs(in_sequence(one.extended, one.segment, one.duplicate), one.extended, one.segment)
    rows = zip(found.segment.tolist(), found.first_missing.tolist(), found.packets.tolist(), strict=True)
    assert list(rows) == naive.account(*columns)["runs"]
    for segment, first, packets, before, after in zip(
        found.segment, found.first_missing, found.packets, found.before, found.after, strict=True
    ):
        assert before == naive.arrival_of(*columns, segment, first - 1)
        assert after == naive.arrival_of(*columns, segment, first + packets)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.tuples(st.integers(0, 2), st.integers(0, 60)), min_size=1, max_size=60, unique=True))
def test_packets_in_any_order_come_out_in_sequence(pairs) -> None:
    segment, extended = np.array(pairs).T
    order = in_sequence(extended, segment, np.zeros(len(pairs), bool)).order
    assert [pairs[i] for i in order] == sorted(pairs)


def test_a_long_stream_backwards_is_put_in_order_by_the_general_sort() -> None:
    numbers = np.arange(5000)[::-1]
    found = sequence_of(numbers)
    assert found.order.tolist() == list(range(4999, -1, -1))
    assert (found.reordered, found.lost, found.expected) == (4999, 0, 5000)


def test_a_duplicate_does_not_hide_a_loss() -> None:
    found = sequence_of([10, 11, 11, 13, 14])
    assert (found.lost, found.duplicated) == (1, 1)


def test_a_late_first_packet_counts() -> None:
    """RFC 3550 A.3 counts from the first packet that arrived, here from the lowest number."""
    assert sequence_of([11, 10, 12]).expected == 3


def test_nothing_is_missing_between_two_segments() -> None:
    found = in_sequence([7, 8, 10, 500, 501], [0, 0, 0, 1, 1], np.zeros(5, bool))
    assert (found.segments, found.expected, found.lost) == (2, 6, 1)
    assert found.place.tolist() == [0, 1, 3, 4, 5]


def test_a_late_packet_of_an_earlier_segment_finds_its_place_and_is_reordered() -> None:
    found = in_sequence([7, 8, 500, 9, 501], [0, 0, 1, 0, 1], np.zeros(5, bool))
    assert found.order.tolist() == [0, 1, 3, 2, 4]
    assert (found.segments, found.lost, found.reordered) == (2, 0, 1)


def test_forged_numbers_cost_no_memory() -> None:
    found = in_sequence([0, 1 << 50], [0, 0], [False, False])
    assert (found.lost, found.longest_gap) == ((1 << 50) - 1, (1 << 50) - 1)
    with pytest.raises(ValueError, match="too many for a mask"):
        received_mask(found)


@pytest.mark.parametrize("duplicate", [[], [True, True]])
def test_a_stream_without_a_packet_of_its_own_is_refused(duplicate) -> None:
    numbers = [1] * len(duplicate)
    with pytest.raises(ValueError, match="at least one packet"):
        in_sequence(numbers, numbers, duplicate)


def test_columns_of_different_length_are_refused() -> None:
    with pytest.raises(ValueError, match="one length"):
        in_sequence([1, 2], [0], [False, False])


def test_columns_handed_in_stay_as_they_were_even_where_they_cannot_be_written_to() -> None:
    one = by_numbers([3, 1, 2])
    for column in (one.extended, one.segment, one.duplicate):
        column.flags.writeable = False
    assert in_sequence(one.extended, one.segment, one.duplicate).order.tolist() == [1, 2, 0]
    assert one.extended.tolist() == [3, 1, 2]
