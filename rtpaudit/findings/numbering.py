"""Numbers and timestamps of one stream: whether they tell what was sent, and when."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.patterns import lasting_steps
from rtpaudit.media.streams import Content
from rtpaudit.metrics.gaps import LONGEST_PACKET_MS
from rtpaudit.units import MS_PER_S, NS_PER_MS, NS_PER_S

Floats = NDArray[np.float64]

LASTING_PACKETS = 20
ROUNDING_MS = 0.5
HABIT = 0.2
NEAR = (0.97, 1.03)
STEADY = 0.02
"""spread of the middle half of rates over two seconds each, up to which they are one clock's (common practice)"""
NO_CLOCK_PPM = 20_000.0
"""no quartz is off by 2 %"""


@dataclass(frozen=True, slots=True)
class Restart:
    """A new segment of a stream."""

    time_ns: int
    timestamps_go_on: bool
    """whether only the numbers jumped"""


def restarts_of(facts: StreamFacts) -> list[Restart]:
    """Segments of a stream after the first."""
    packets = facts.packets
    rows = np.flatnonzero(np.diff(packets.segment) > 0) + 1
    found = []
    for row in rows[:64].tolist():
        media_ms = (
            (packets.media_ticks[row] - packets.media_ticks[row - 1]) / max(facts.stream.clock_rate_hz, 1) * MS_PER_S
        )
        passed_ms = (packets.time_ns[row] - packets.time_ns[row - 1]) / NS_PER_MS
        found.append(Restart(int(packets.time_ns[row]), abs(media_ms - passed_ms) < 100.0 + facts.packet_time_ms))
    return found


def timestamp_rate(facts: StreamFacts) -> float | None:
    """Rate at which timestamps really count, where it is far from the one agreed, else None. [Hz]"""
    timed, rate = facts.timed, facts.stream.clock_rate_hz
    if facts.stream.clock_basis == "inferred" or len(timed.row) < 50 or timed.time_s[-1] - timed.time_s[0] < 2.0:
        return None
    packets = facts.packets
    row = timed.row
    # Over two seconds or so, that a step of the capture's clock spoils few of the pairs.
    lag = max(1, min(len(row) // 2, round(2000 / facts.packet_time_ms)))
    same = packets.segment[row[lag:]] == packets.segment[row[:-lag]]
    passed = (packets.time_ns[row[lag:]] - packets.time_ns[row[:-lag]])[same] / NS_PER_S
    moved = (packets.media_ticks[row[lag:]] - packets.media_ticks[row[:-lag]])[same]
    sound = passed > 1.0
    if not sound.any():
        return None
    rates = moved[sound] / passed[sound]
    low, measured, high = np.percentile(rates, [25, 50, 75]).tolist()
    # A clock keeps its pace, however wrong it is; a queue that fills does not.
    if high - low > STEADY * measured:
        return None
    if not NEAR[0] * rate < measured < NEAR[1] * rate:
        return float(measured)
    skew = facts.assessed.figures.clock_skew_ppm
    return rate * (1.0 + skew * 1e-6) if abs(skew) > NO_CLOCK_PPM else None


@dataclass(frozen=True, slots=True)
class WrongSteps:
    """Timestamps that do not follow the speech."""

    odd: int
    """neighbours whose timestamps do not differ by what the first carries"""
    pairs: int
    jumps: int
    """lasting jumps of 100 ms and more that arrivals do not bear out"""
    largest_ms: float


def wrong_steps(facts: StreamFacts) -> WrongSteps:
    """How timestamps differ from packet to packet within unbroken speech."""
    packets, rate = facts.packets, facts.stream.clock_rate_hz
    order = facts.sequence.order
    # Comfort noise keeps time as speech does; events stand still by right.
    keeps_time = packets.content[order] != Content.EVENT
    both = keeps_time[1:] & keeps_time[:-1] & (np.diff(facts.sequence.place) == 1)
    both &= np.diff(packets.segment[order]) == 0
    if rate <= 0 or not both.any():
        return WrongSteps(0, 0, 0, 0.0)
    step_ms = (np.diff(packets.media_ticks[order]) * (MS_PER_S / rate))[both]
    passed_ms = (np.diff(packets.time_ns[order]) / NS_PER_MS)[both]
    usual = facts.packet_time_ms
    # A change of packet time, or a pause that arrivals bear out, is no fault.
    whole = np.isin(np.rint(step_ms * 10), np.rint(np.array([one for _, one in packet_times_of(facts)] + [usual]) * 10))
    pause = (step_ms > usual) & (np.abs(step_ms - passed_ms) < 100.0 + usual)
    odd = ~whole & ~pause
    off = np.where(odd, step_ms - passed_ms, 0.0)
    lasting = lasting_steps(np.cumsum(off), 100.0, LASTING_PACKETS) if odd.any() else []
    # A packet that was only held up on its way does not move those that follow.
    at = np.flatnonzero(both)
    lasting = [one for one in lasting if _moves_the_delay(facts, int(at[one.at]), one.height)]
    return WrongSteps(
        int(odd.sum()), int(both.sum()), len(lasting), max((abs(one.height) for one in lasting), default=0.0)
    )


def _moves_the_delay(facts: StreamFacts, place: int, jump_ms: float) -> bool:
    """Whether delays beside a packet of the sequence step down by about as much as timestamps jump ahead."""
    delay = facts.delay_of_row[facts.sequence.order]
    before, after = delay[max(0, place - LASTING_PACKETS) : place + 1], delay[place + 1 : place + 1 + LASTING_PACKETS]
    before, after = before[~np.isnan(before)], after[~np.isnan(after)]
    if not len(before) or not len(after):
        return False
    return bool(abs(np.median(after) - np.median(before) + jump_ms) < 0.5 * abs(jump_ms))


def keeps_no_time(facts: StreamFacts) -> bool:
    """Whether timestamps are so wrong that sound laid by them lies at no known time."""
    return timestamp_rate(facts) is not None or wrong_steps(facts).jumps > 0


def packet_times_of(facts: StreamFacts) -> list[tuple[int, float]]:
    """First packet and length of each passage of one packet time that lasts. [row, ms]"""
    packets, rate = facts.packets, facts.stream.clock_rate_hz
    order = facts.sequence.order
    both = facts.audio[order][1:] & facts.audio[order][:-1] & (np.diff(facts.sequence.place) == 1)
    if rate <= 0 or not both.any():
        return []
    steps = np.diff(packets.media_ticks[order])
    sound = both & (steps > 0) & (steps <= rate * LONGEST_PACKET_MS / MS_PER_S)
    rows, steps = order[:-1][sound], steps[sound]
    edges = np.concatenate([[0], np.flatnonzero(np.diff(steps)) + 1, [len(steps)]])
    first = edges[:-1][np.diff(edges) >= LASTING_PACKETS]
    held = steps[first]
    kept = np.concatenate([[True], np.diff(held) != 0]) if len(held) else np.zeros(0, np.bool_)
    return [(int(rows[at]), float(steps[at]) * MS_PER_S / rate) for at in first[kept][:64].tolist()]


def skipped_numbers(facts: StreamFacts) -> NDArray[np.int64]:
    """Items of missing numbers over which timestamps and arrivals go on as if nothing were missing."""
    packets, runs, rate = facts.packets, facts.runs, facts.stream.clock_rate_hz
    if rate <= 0 or not len(runs.packets):
        return facts.lost_items[:0]
    media_ms = (packets.media_ticks[runs.after] - packets.media_ticks[runs.before]) * (MS_PER_S / rate)
    passed_ms = (packets.time_ns[runs.after] - packets.time_ns[runs.before]) / NS_PER_MS
    speech = facts.audio[runs.after] & facts.audio[runs.before]
    usual = _step_before(facts)
    bridged = speech & (np.abs(media_ms - usual) < ROUNDING_MS) & (passed_ms < 2.5 * usual)
    # Packets of several lengths may hide a few losses so; a sender that cannot count does it again and again.
    return facts.lost_items[bridged] if bridged.mean() >= HABIT else facts.lost_items[:0]


def _step_before(facts: StreamFacts) -> Floats:
    """Packet time just before each run of missing numbers, that of the stream where it cannot be told. [ms]"""
    packets, runs, order = facts.packets, facts.runs, facts.sequence.order
    here = np.maximum(runs.position, 1)
    ticks = packets.media_ticks[order[here]] - packets.media_ticks[order[here - 1]]
    step_ms = ticks * (MS_PER_S / facts.stream.clock_rate_hz)
    known = (facts.sequence.place[here] - facts.sequence.place[here - 1] == 1) & (runs.position > 0)
    known &= (step_ms > 0) & (step_ms <= LONGEST_PACKET_MS)
    return np.asarray(np.where(known, step_ms, facts.packet_time_ms))


def reused_numbers(facts: StreamFacts) -> int:
    """Numbers that stood on two different packets."""
    packets = facts.packets
    copies = np.flatnonzero(packets.duplicate)
    if not len(copies):
        return 0
    order = facts.sequence.order
    name = packets.segment.astype(np.int64) << 48 | packets.extended
    at = order[np.clip(np.searchsorted(name[order], name[copies]), 0, len(order) - 1)]
    return int((packets.timestamp[copies] != packets.timestamp[at]).sum())


def successions(streams: list[StreamFacts]) -> list[int]:
    """Times at which one SSRC followed another between the same two ends."""
    times = []
    ordered = sorted(streams, key=lambda one: one.assessed.started_ns)
    for k, later in enumerate(ordered):
        for earlier in ordered[:k]:
            one, other = earlier.stream, later.stream
            ends = (one.source, one.destination, one.destination_port)
            same = ends == (other.source, other.destination, other.destination_port)
            if same and one.ssrc != other.ssrc and later.assessed.started_ns > earlier.assessed.ended_ns - NS_PER_S:
                times.append(later.assessed.started_ns)
                break
    return times
