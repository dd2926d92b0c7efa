"""The RFC 3550 estimator: against print, against exact fractions, and by hand."""

import math
from collections import defaultdict
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings

from rtpaudit.metrics.jitter import interarrival_jitter, summarize
from rtpaudit.serial import unwrap
from tests.metrics.streams import streams
from tests.naive import timing as naive
from tests.published import published_rows

TICK_NS = 125_000
"""of the 8 kHz clock of the printed examples"""

EXAMPLES = defaultdict(list)
for each in published_rows("jitter_example"):
    EXAMPLES[each["id"]].append(each)


@pytest.mark.parametrize("rows", EXAMPLES.values(), ids=EXAMPLES.keys())
def test_printed_examples_packet_by_packet(rows) -> None:
    """RFC 3550 6.4.1 and A.8 worked out in exact fractions; reordering, pauses and a wrapped timestamp among them."""
    time_ns = np.array([int(row["arrival_ts_units"]) for row in rows]) * TICK_NS
    ticks = unwrap(np.array([int(row["rtp_timestamp"]) for row in rows], np.uint32), 32)
    found = interarrival_jitter(time_ns, ticks, np.zeros(len(rows)), 8000)
    wanted = [float(Fraction(row["J_exact"])) / 8 for row in rows]
    assert found == pytest.approx(wanted, abs=1e-9)


@settings(max_examples=150, deadline=None)
@given(streams())
def test_every_estimate_is_that_of_a_plain_loop(one) -> None:
    heard = one.rows(one.audio & ~one.duplicate)
    plain = heard.lists()
    wanted = naive.jitter_ms(plain.time_ns, plain.media_ticks, plain.segment, plain.clock_rate_hz)
    found = interarrival_jitter(heard.time_ns, heard.media_ticks, heard.segment, heard.clock_rate_hz)
    assert found == pytest.approx(wanted, rel=1e-9, abs=1e-7)


def test_a_restart_adds_no_difference() -> None:
    """Timestamps start anew at random; the estimate stays and goes on from there."""
    time_ns = np.array([0, 21, 40, 60, 80]) * 1_000_000
    ticks = np.array([0, 160, 9_000_000, 9_000_160, 9_000_320])
    found = interarrival_jitter(time_ns, ticks, [0, 0, 1, 1, 1], 8000)
    assert found.tolist() == pytest.approx([0, 1 / 16, 1 / 16, 1 / 16 * 15 / 16, 1 / 16 * (15 / 16) ** 2])


def test_another_clock_rate_adds_no_difference() -> None:
    found = interarrival_jitter(np.arange(4) * 20_000_000, [0, 160, 480, 800], [0] * 4, [8000, 8000, 16000, 16000])
    assert found.tolist() == [0, 0, 0, 0]


def test_a_late_packet_of_an_earlier_segment_adds_no_difference() -> None:
    time_ns = np.array([0, 20, 40, 41, 60]) * 1_000_000
    ticks = [0, 160, 77_000, 320, 77_160]
    assert interarrival_jitter(time_ns, ticks, [0, 0, 1, 0, 1], 8000).tolist() == [0] * 5


def test_the_mean_leaves_out_the_first_packet_and_needs_two() -> None:
    figures = summarize(np.array([0.0, 3.0, 5.0, 4.0]))
    assert (figures.mean_ms, figures.max_ms, figures.last_ms) == (4.0, 5.0, 4.0)
    assert math.isnan(summarize(np.zeros(1)).mean_ms)
    assert math.isnan(summarize(np.zeros(0)).last_ms)
