"""Which part of a stream counts in the rating of its call: from the answer on, and not while the call was on hold."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.rating import Rated
from rtpaudit.assess.stream import Measured
from rtpaudit.emodel.g107 import rating
from rtpaudit.media.calls import Call
from rtpaudit.metrics.windows import WINDOW_NS
from rtpaudit.profile import Profile
from rtpaudit.units import percent

SETTLING_NS = WINDOW_NS // 2
"""a window counts by where its middle lies"""


@dataclass(frozen=True, slots=True)
class CountedPart:
    """What counts of one stream."""

    packets: int
    """expected packets that count; 0 where nothing does"""
    r_factor: float


Counted = Mapping[str, CountedPart]
"""by id of the stream"""


def counted_parts(
    calls: Sequence[Call], measured: Sequence[Measured], rated: Rated, profile: Profile
) -> dict[str, CountedPart]:
    """What counts of every stream; a stream of which all counts keeps its own rating."""
    R = rated.parts.R
    found = {one.stream.id: CountedPart(one.network.packets_expected, float(R[k])) for k, one in enumerate(measured)}
    place = {id(one.stream): k for k, one in enumerate(measured)}
    for call in calls:
        for stream in call.streams:
            k = place[id(stream)]
            windows = _counting_windows(call, measured[k])
            if not windows.all():
                found[stream.id] = _part(windows, measured[k], rated, k, profile)
    return found


def _counting_windows(call: Call, one: Measured) -> NDArray[np.bool_]:
    """Windows of a stream after the answer and outside any hold. A call that was never answered counts whole."""
    middle = one.started_ns + (one.network.windows.from_s * 1e9).astype(np.int64) + SETTLING_NS
    counts = np.ones(len(middle), np.bool_)
    said = call.signalled
    if said is None or said.answered_ns is None:
        return counts
    if not (len(middle) == 1 and one.ended_ns >= said.answered_ns):
        counts &= middle >= said.answered_ns
    for hold in said.holds:
        counts &= (middle < hold.from_ns) | (middle >= (hold.until_ns or call.ended_ns))
    return counts


def _part(windows: NDArray[np.bool_], one: Measured, rated: Rated, k: int, profile: Profile) -> CountedPart:
    table = one.network.windows
    expected = int(table.packets_expected[windows].sum())
    missed = int(table.packets_lost[windows].sum())
    if one.playback is not None:
        missed += int(one.playback.missed_per_window[windows].sum())
    if expected == 0:
        return CountedPart(0, float("nan"))
    R = rating(
        profile.planning,
        Ta=rated.delay_ms[k],
        Ie=rated.codec.Ie[k],
        Bpl=rated.codec.Bpl[k],
        Ppl=percent(missed, expected),
        BurstR=one.figures.burst_ratio,
        TELR=rated.telr_db[k],
    ).R
    return CountedPart(expected, float(R))
