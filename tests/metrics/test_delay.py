"""Packet delay variation: against print, against a slow twin, and with a skew that is known."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.delay import delay_variation, delays, percentile, summarize
from tests.metrics.streams import MS, paced, streams
from tests.naive import timing as naive
from tests.published import published_rows


def test_the_printed_example() -> None:
    """RFC 5481, Figure 1: delays of 20, 10, 20, 25, 20 ms."""
    (row,) = [row for row in published_rows("sequence_and_delay") if row["id"] == "RFC5481-PDV"]
    delay_ms = np.array(row["inputs"].removeprefix("delay=").split(), float)
    time_ns = np.rint((np.arange(5) * 20 + delay_ms) * MS).astype(np.int64)
    found = delay_variation(delays(time_ns, np.arange(5) * 160, [0] * 5, 8000))
    assert found == pytest.approx([float(value) for value in row["expected"].split()])


@settings(max_examples=150, deadline=None)
@given(streams())
def test_every_variation_is_that_of_a_plain_loop(one) -> None:
    heard = one.rows(one.audio & ~one.duplicate)
    plain = heard.lists()
    wanted = naive.delay_variation_ms(plain.time_ns, plain.media_ticks, plain.segment, plain.clock_rate_hz)
    of = delays(heard.time_ns, heard.media_ticks, heard.segment, heard.clock_rate_hz)
    assert delay_variation(of) == pytest.approx(wanted, rel=1e-9, abs=1e-5)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.floats(0, 1e4), min_size=1, max_size=50), st.sampled_from([50.0, 95.0, 99.0]))
def test_percentiles_are_linear(values, share) -> None:
    found = percentile(np.sort(values), share)
    assert found == pytest.approx(naive.percentile(values, share))
    assert found == pytest.approx(float(np.percentile(values, share)))


def test_a_known_skew_is_removed() -> None:
    """100 ppm over 60 s are 6 ms that no packet was late."""
    one = paced(60, skew_ppm=100.0, delay_ms=0.0)
    of = delays(one.time_ns, one.media_ticks, one.segment, one.clock_rate_hz)
    assert delay_variation(of).max() == pytest.approx(6.0, abs=0.01)
    assert delay_variation(of, 100.0).max() == pytest.approx(0.0, abs=1e-3)


def test_no_packet_has_no_variation() -> None:
    of = delays([], [], [], 8000)
    assert math.isnan(summarize(delay_variation(of)).p95_ms)
