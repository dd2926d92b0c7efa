"""What the plots of a call draw."""

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rtpaudit.profile import Playout
from rtpaudit.report.plots import COARSE, FINE, FINEST, Detail, curve, detail_for, extremes, gaps, lanes, windows
from rtpaudit.walk import Audit, audit
from tests.report import made

DEMO = Path(__file__).parents[2] / "rtpaudit" / "demo" / "demo.pcap"


@pytest.fixture(scope="module")
def demo() -> Audit:
    return audit(DEMO)


@given(arrays(np.float64, st.integers(1, 400), elements=st.floats(0, 1e6)), st.integers(2, 60))
def test_thinning_keeps_the_extremes_and_little_else(values, most) -> None:
    kept = extremes(values, most)
    assert len(kept) <= most
    assert (values[kept].min(), values[kept].max()) == (values.min(), values.max())
    assert (np.diff(kept) > 0).all()


def test_few_values_are_all_kept() -> None:
    assert extremes(np.arange(10.0), 10).tolist() == list(range(10))


def test_a_gap_lies_where_its_sound_is_missing() -> None:
    stream = made.stream("s01", gaps=made.gaps((7, 12, made.BEGIN_NS + 2 * made.SECOND, 240.0, 2.0)))
    # A packet time behind the last packet before it.
    assert gaps(stream, made.BEGIN_NS, 10) == [[2020.0, 240.0, 12]]


def test_of_too_many_gaps_the_longest_are_kept_in_their_order() -> None:
    rows = [(1, count, made.BEGIN_NS + k * made.SECOND, 20.0 * count, float(k)) for k, count in enumerate([1, 9, 2, 8])]
    assert [row[2] for row in gaps(made.stream("s01", gaps=made.gaps(*rows)), made.BEGIN_NS, 2)] == [9, 8]


def test_windows_leave_out_what_is_nothing_throughout() -> None:
    told = windows(made.stream("s01", windows=made.windows(3, discarded=True)))
    assert told["count"] == 3
    assert told["late"] == [3, 3, 3]
    assert "lost" not in told
    assert told["r"] == [90.0, 90.0, 90.0]


def test_a_stream_without_playback_still_has_its_lanes() -> None:
    told = lanes(made.stream("s01", begin_s=1.5), made.BEGIN_NS, FINE)
    assert (told["begin"], told["end"], told["gaps"]) == (1500.0, 11500.0, [])
    assert "at" not in told


def test_points_and_late_packets_are_those_of_the_figures(demo: Audit) -> None:
    for one in demo.assessment.streams:
        told = lanes(one, one.started_ns, FINE)
        assert len(told["at"]) + len(told["late"]) == len(one.playback.rows)
        assert told["late_in_all"] == len(told["late"]) == one.figures.packets_discarded
        delays = np.array(told["delay"] + [row[1] for row in told["late"]]) / 10
        assert delays.max() == pytest.approx(one.figures.pdv_max_ms, abs=0.05)
        assert np.percentile(delays, 95) == pytest.approx(one.figures.pdv_p95_ms, abs=0.06)


def test_what_is_late_lies_beyond_the_deadline_and_what_is_played_before_it(demo: Audit) -> None:
    (one,) = [one for one in demo.assessment.streams if one.figures.packets_discarded]
    told = lanes(one, one.started_ns, FINE)
    # A fixed buffer and one talkspurt: one deadline.
    first, last = told["deadline"]
    assert first[1] == last[1]
    assert all(delay > first[1] for _, delay, _ in told["late"])
    assert all(delay <= first[1] for delay in told["delay"])
    assert all(delay - over == first[1] or abs(delay - over - first[1]) <= 1 for _, delay, over in told["late"])


def test_a_bound_on_points_keeps_the_latest_packets(demo: Audit) -> None:
    (one,) = [one for one in demo.assessment.streams if one.figures.packets_discarded]
    whole = lanes(one, one.started_ns, FINE)
    few = lanes(one, one.started_ns, Detail(envelope=10, arrivals=50, marks=5, rows=5))
    assert len(few["at"]) <= 50
    assert sorted(row[2] for row in few["late"]) == sorted(row[2] for row in whole["late"])[-5:]
    assert few["late_in_all"] == whole["late_in_all"]


def test_todays_buffer_lies_on_the_curve(demo: Audit) -> None:
    for one in demo.assessment.streams:
        told = curve(one, Playout())
        at, r = told["today"]
        assert at == 60.0
        assert told["r"][told["delay_ms"].index(at)] == pytest.approx(r, abs=0.6)
        assert told["best"][1] >= r - 0.6


def test_without_playback_there_is_no_curve() -> None:
    assert curve(made.stream("s01"), Playout()) is None


def test_many_calls_get_less_detail() -> None:
    assert (detail_for(1), detail_for(12), detail_for(500)) == (FINEST, FINE, COARSE)
