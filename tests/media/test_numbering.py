"""Extended numbers by RFC 3550, A.1, counted by hand."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.media.datagrams import Datagrams, joined, packet, talk


def only(datagrams):
    (stream,) = datagrams.streams()
    return stream.packets


def test_a_number_that_wraps_goes_on_counting():
    packets = only(talk(range(65530, 65545)))
    assert packets.extended.tolist() == list(range(65530, 65545))
    assert packets.segment.max() == 0


def test_numbers_go_on_over_several_wraps():
    packets = only(talk(range(0, 200_000, 50)))
    assert packets.extended[-1] - packets.extended[0] == 199_950


def test_a_timestamp_that_wraps_goes_on_ticking():
    packets = only(talk(range(20), first_ticks=2**32 - 800))
    assert packets.media_ticks.tolist() == [160 * k for k in range(20)]


def test_a_late_packet_gets_its_place():
    order = [0, 1, 2, 4, 5, 3, 6, 7, 8, 9]
    made = Datagrams()
    for turn, number in enumerate(order):
        made.add(20.0 * turn, packet(number, 160 * number))
    packets = only(made)
    assert packets.extended.tolist() == order
    assert not packets.duplicate.any()


def test_a_first_packet_that_comes_second_lies_below():
    made = Datagrams()
    for turn, number in enumerate([11, 10, 12, 13, 14, 15]):
        made.add(20.0 * turn, packet(number, 160 * number))
    packets = only(made)
    assert packets.extended.tolist() == [11, 10, 12, 13, 14, 15]


def test_every_packet_of_a_doubled_capture_counts_once():
    made = Datagrams()
    for at, payload, flow, _ in talk(range(50)).rows:
        made.add(at, payload, flow).add(at + 0.01, payload, flow)
    packets = only(made)
    assert packets.duplicate.sum() == 50
    assert len(np.unique(packets.extended)) == 50
    assert packets.segment.max() == 0


def test_a_copy_is_a_duplicate_however_late():
    packets = only(joined(talk(range(400)), talk([7], start_ms=8000.0, first_ticks=160 * 7)))
    assert packets.duplicate.tolist() == [False] * 400 + [True]
    assert packets.extended[-1] == 7


def test_a_jump_ahead_that_the_next_packet_confirms_begins_a_segment():
    packets = only(joined(talk(range(100)), talk(range(5000, 5050), start_ms=2000.0, first_ticks=777_000_000)))
    assert packets.segment.tolist() == [0] * 100 + [1] * 50
    assert packets.extended[100:].tolist() == list(range(5000, 5050))


def test_a_jump_back_that_the_next_packet_confirms_begins_a_segment():
    packets = only(joined(talk(range(500, 700)), talk(range(580, 630), start_ms=4000.0, first_ticks=777_000_000)))
    assert packets.segment.max() == 1
    assert (packets.segment == 1).sum() == 50


@pytest.mark.parametrize(("ahead", "segments"), [(2999, 1), (3000, 2)])
def test_three_thousand_ahead_is_the_limit_of_loss(ahead, segments):
    packets = only(joined(talk(range(10)), talk(range(9 + ahead, 40 + ahead), start_ms=200.0, first_ticks=1600)))
    assert packets.segment.max() + 1 == segments


@pytest.mark.parametrize(("behind", "segments"), [(99, 1), (100, 2)])
def test_a_hundred_behind_is_the_limit_of_reordering(behind, segments):
    first = 1000 - behind
    late = Datagrams()
    for turn, number in enumerate((first, first + 1)):
        late.add(20_000 + 20.0 * turn, packet(number, 5 + 160 * number))
    on_and_off = [number for number in range(1001) if number not in (first, first + 1)]
    packets = only(joined(talk(on_and_off), late, talk(range(1001, 1020), start_ms=20_100.0, first_ticks=160_160)))
    assert packets.segment.max() + 1 >= segments
    assert (packets.segment.max() == 0) == (segments == 1)


def test_a_stray_number_is_left_out():
    stray = Datagrams().add(200.0, packet(30_000, 12_345))
    packets = only(joined(talk(range(10)), stray, talk(range(10, 30), start_ms=200.0, first_ticks=1600)))
    assert len(packets) == 30
    assert packets.segment.max() == 0


def test_one_very_late_packet_fills_its_gap():
    numbers = [number for number in range(400) if number != 50]
    late = Datagrams().add(8000.0, packet(50, 160 * 50))
    packets = only(joined(talk(numbers), late, talk(range(400, 420), start_ms=8000.0, first_ticks=64_000)))
    assert sorted(packets.extended.tolist()) == list(range(420))
    assert packets.segment.max() == 0


def test_an_outage_is_loss_where_timestamp_and_arrival_agree():
    after = talk(range(4000, 4100), start_ms=80_000.0, first_ticks=160 * 4000)
    packets = only(joined(talk(range(100)), after))
    assert packets.segment.max() == 0
    assert packets.extended[-1] == 4099


def test_an_outage_longer_than_all_numbers_is_counted_by_the_timestamp():
    gone = 65536 + 5000
    after = talk(range(gone, gone + 100), start_ms=20.0 * gone, first_ticks=160 * gone)
    packets = only(joined(talk(range(100)), after))
    assert packets.segment.max() == 0
    assert packets.extended[-1] == gone + 99


def test_a_jump_whose_timestamp_does_not_move_with_it_is_no_outage():
    after = talk(range(4000, 4100), start_ms=80_000.0, first_ticks=160 * 100)
    streams = joined(talk(range(100)), after).streams()
    assert [len(one.packets) for one in streams] == [100, 100]


def test_a_restart_after_a_minute_of_silence_is_a_new_stream():
    before, after = talk(range(100)), talk(range(9000, 9100), start_ms=63_000.0, first_ticks=3)
    first, second = joined(before, after).streams()
    assert (len(first.packets), len(second.packets)) == (100, 100)
    assert second.packets.segment.max() == 0
    assert second.packets.media_ticks[0] == 0


def test_a_restart_within_a_minute_stays_in_the_stream():
    packets = only(joined(talk(range(100)), talk(range(9000, 9100), start_ms=40_000.0, first_ticks=3)))
    assert packets.segment.max() == 1


def test_silence_suppression_is_neither_loss_nor_a_new_segment():
    packets = only(joined(talk(range(100)), talk(range(100, 200), start_ms=32_000.0, first_ticks=256_000)))
    assert packets.segment.max() == 0
    assert packets.extended.tolist() == list(range(200))
    assert packets.media_ticks[100] == 256_000


@settings(deadline=None, max_examples=60)
@given(
    start=st.integers(0, 65535),
    lost=st.sets(st.integers(5, 290), max_size=90),
    doubled=st.sets(st.integers(0, 299), max_size=60),
)
def test_loss_and_copies_are_counted_as_they_were_made(start, lost, doubled):
    made = Datagrams()
    for at, payload, _, _ in talk(range(start, start + 300)).rows:
        number = int(at / 20.0)
        if number not in lost:
            made.add(at, payload)
            if number in doubled:
                made.add(at + 25.0, payload)
    made.rows.sort(key=lambda row: row[0])
    packets = only(made)
    assert packets.duplicate.sum() == len(doubled - lost)
    assert sorted(set((packets.extended - start).tolist())) == [n for n in range(300) if n not in lost]
