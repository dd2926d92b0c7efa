"""Faults of the network: loss, delay, order, marking, route."""

import numpy as np

from tests.faultbench.kinds import kind
from tests.faultbench.plan import Plan
from tests.faultbench.stream import Leg, Packets

TALKING = ("",)
"""without suppression of silence, so that packets run all the time"""


def spans_lost(packets: Packets, begin_s: float, length_s: float, share: float, draw: np.random.Generator) -> None:
    """Lose packets that pass within a moment."""
    inside = (packets.at_s >= begin_s) & (packets.at_s < begin_s + length_s)
    packets.lost |= inside & (draw.random(len(packets)) < share)


def hold_up(packets: Packets, begin_s: float, height_s: float, fall: float) -> None:
    """A delay that jumps up at a moment and falls again; order is kept. ``fall`` is how fast: 1 lets all go at once."""
    after = packets.at_s - begin_s
    extra = np.where((after >= 0) & (after < height_s / fall), height_s - fall * after, 0.0)
    packets.at_s = np.maximum.accumulate(packets.at_s + extra)


def places(draw: np.random.Generator, plan: Plan, count: int, length_s: float = 0.5) -> list[float]:
    """Moments spread over a call, unevenly."""
    margin = 1.5
    room = (plan.seconds - 2 * margin) / count
    return [margin + room * (k + float(draw.uniform(0.05, 0.95))) - length_s / 2 for k in range(count)]


@kind("random-loss")
def random_loss(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    share = float(draw.choice([draw.uniform(0.01, 0.03), draw.uniform(0.03, 0.1)]))
    leg.way.append(lambda packets: _lose(packets, draw.random(len(packets)) < share))
    if draw.random() < 0.3:
        other = plan.other(leg)
        other.way.append(lambda packets: _lose(packets, draw.random(len(packets)) < share * 0.8))


def _lose(packets: Packets, which: np.ndarray) -> None:
    packets.lost |= which


@kind("random-loss/after")
def random_loss_after(plan: Plan) -> None:
    """Only the far receiver misses the packets."""
    draw, leg = plan.draw, plan.leg()
    plan.rtcp = True
    plan.longer(25, 50)
    share = float(draw.uniform(0.02, 0.08))
    leg.after.append(lambda packets: _lose_after(packets, draw.random(len(packets)) < share))


def _lose_after(packets: Packets, which: np.ndarray) -> None:
    packets.lost_after |= which


@kind("loss-burst")
def loss_burst(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    count = int(draw.integers(1, 7))
    moments = places(draw, plan, count)
    lengths = draw.uniform(0.12, 0.7, count)

    def act(packets: Packets) -> None:
        for begin, length in zip(moments, lengths, strict=True):
            spans_lost(packets, begin, max(float(length), 5.1 * leg.packet_ms / 1000), 1.0, draw)

    leg.way.append(act)


@kind("loss-burst/two-states")
def loss_burst_two_states(plan: Plan) -> None:
    """A line that is good or bad, with packets lost in the bad state only."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(20, 45)
    stay, enter, share = (
        float(draw.uniform(0.8, 0.92)),
        float(draw.uniform(0.002, 0.006)),
        float(draw.uniform(0.75, 1.0)),
    )

    def act(packets: Packets) -> None:
        bad = False
        for k in range(len(packets)):
            bad = draw.random() < (stay if bad else enter)
            packets.lost[k] |= bad and draw.random() < share
        begin = len(packets) // 2
        packets.lost[begin : begin + 7] = True

    leg.way.append(act)


@kind("periodic-loss", suppression=TALKING)
def periodic_loss(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    plan.longer(24, 55)
    period = float(draw.uniform(1.5, plan.seconds / 7))
    packets_lost = int(draw.integers(1, 9))
    begin = float(draw.uniform(0.5, period))

    def act(packets: Packets) -> None:
        for moment in np.arange(begin, plan.seconds, period):
            moment += float(draw.normal(0, 0.004 * period))
            first = int(np.searchsorted(packets.at_s, moment))
            packets.lost[first : first + packets_lost] = True

    leg.way.append(act)


@kind("outage")
def outage(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    length = float(draw.uniform(1.3, 5.0))
    begin = float(draw.uniform(2.0, plan.seconds - length - 2.0))
    leg.suppression = ""
    leg.way.append(lambda packets: spans_lost(packets, begin, length, 1.0, draw))


@kind("loss-both-ways", suppression=TALKING)
def loss_both_ways(plan: Plan) -> None:
    draw = plan.draw
    count = int(draw.integers(3, 8))
    moments, lengths = places(draw, plan, count), draw.uniform(0.1, 0.5, count)
    for leg in plan.legs:

        def act(packets: Packets, leg: Leg = leg) -> None:
            for begin, length in zip(moments, lengths, strict=True):
                spans_lost(packets, begin, max(float(length), 2.5 * leg.packet_ms / 1000), 1.0, draw)

        leg.way.append(act)


@kind("policing", suppression=TALKING)
def policing(plan: Plan) -> None:
    """A token bucket a little too small for the stream."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(20, 45)
    short = float(draw.uniform(0.04, 0.2))
    depth = float(draw.uniform(2, 12))

    def act(packets: Packets) -> None:
        tokens, before = depth, 0.0
        for k in range(len(packets)):
            tokens = min(depth, tokens + (packets.at_s[k] - before) * 1000 / leg.packet_ms * (1 - short))
            before = packets.at_s[k]
            if tokens >= 1.0:
                tokens -= 1.0
            else:
                packets.lost[k] = True

    leg.way.append(act)


@kind("load", suppression=TALKING)
def load(plan: Plan) -> None:
    """A queue that fills with foreign traffic, overflows, and drains."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(20, 45)
    count = int(draw.integers(3, 8))
    moments = places(draw, plan, count, 2.0)
    full = float(draw.uniform(0.06, 0.2))
    rises, stays = draw.uniform(0.4, 1.5, count), draw.uniform(0.3, 1.2, count)

    def act(packets: Packets) -> None:
        at = packets.at_s
        queue = np.zeros(len(packets))
        for begin, rise, stay in zip(moments, rises, stays, strict=True):
            after = at - begin
            grown = np.clip(after / rise, 0, 1) * full
            falls = np.clip(1 - (after - rise - stay) / (0.5 * rise), 0, 1)
            queue = np.maximum(queue, np.where(after > 0, grown * falls, 0.0))
        queue *= 1 + draw.normal(0, 0.02, len(packets))
        packets.lost |= (queue > 0.93 * full) & (draw.random(len(packets)) < 0.35)
        packets.at_s = np.maximum.accumulate(at + np.maximum(queue, 0))

    leg.way.append(act)


@kind("delay-spike", suppression=TALKING)
def delay_spike(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    count = int(draw.integers(1, 6))
    moments, heights = places(draw, plan, count), draw.uniform(0.15, 0.6, count)
    fall = float(draw.choice([1.0, draw.uniform(0.3, 0.9)]))

    def act(packets: Packets) -> None:
        for begin, height in zip(moments, heights, strict=True):
            hold_up(packets, begin, float(height), fall)

    leg.way.append(act)


@kind("periodic-delay", suppression=TALKING)
def periodic_delay(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    plan.longer(24, 55)
    period = float(draw.uniform(1.0, plan.seconds / 7))
    height, begin = float(draw.uniform(0.1, 0.3)), float(draw.uniform(0.5, 2.0))

    def act(packets: Packets) -> None:
        for moment in np.arange(begin, plan.seconds, period):
            hold_up(packets, float(moment), height * float(draw.uniform(0.9, 1.1)), 1.0)

    leg.way.append(act)


@kind("jitter-beyond-buffer")
def jitter_beyond_buffer(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    in_order = draw.random() < 0.5
    shape = str(draw.choice(["normal", "exponential", "uniform"]))
    width = float(draw.uniform(0.03, 0.06))

    def act(packets: Packets) -> None:
        n = len(packets)
        extra = {
            "normal": np.abs(draw.normal(2 * width, width, n)),
            "exponential": draw.exponential(width, n),
            "uniform": draw.uniform(0, 3.5 * width, n),
        }[shape]
        packets.at_s = packets.at_s + extra
        if in_order:
            packets.at_s = np.maximum.accumulate(packets.at_s)

    leg.way.append(act)


@kind("buffer-shallow")
def buffer_shallow(plan: Plan) -> None:
    """A receiver that reports (RFC 3611) a small buffer and many packets too late for it."""
    draw, leg = plan.draw, plan.leg()
    plan.rtcp = True
    plan.longer(20, 45)
    nominal = int(draw.integers(5, 16))
    late = float(draw.uniform(0.02, 0.08))
    width = float(draw.uniform(0.004, 0.008))
    leg.way.append(lambda packets: _spread(packets, draw.gamma(2.0, width / 2, len(packets)), in_order=True))
    reporter = "b" if leg is plan.a else "a"
    plan.extended_reports[reporter] = {
        "discard": int(256 * late), "nominal_ms": nominal, "maximum_ms": nominal + 5, "absolute_ms": nominal + 5,
        "round_trip_ms": 60, "end_ms": 40 + nominal, "gap_density": int(256 * late),
    }  # fmt: skip


def _spread(packets: Packets, extra: np.ndarray, in_order: bool) -> None:
    packets.at_s = packets.at_s + extra
    if in_order:
        packets.at_s = np.maximum.accumulate(packets.at_s)


@kind("buffer-deep")
def buffer_deep(plan: Plan) -> None:
    """A receiver that reports (RFC 3611) a buffer far deeper than its quiet network needs."""
    draw, leg = plan.draw, plan.leg()
    plan.rtcp = True
    plan.longer(20, 45)
    nominal = int(draw.integers(220, 500))
    reporter = "b" if leg is plan.a else "a"
    plan.extended_reports[reporter] = {
        "nominal_ms": nominal, "maximum_ms": nominal + 60, "absolute_ms": nominal + 200,
        "round_trip_ms": 60, "end_ms": 40 + nominal,
    }  # fmt: skip


@kind("reordering")
def reordering(plan: Plan) -> None:
    """Some packets take a longer way and are overtaken."""
    draw, leg = plan.draw, plan.leg()
    share, by = float(draw.uniform(0.03, 0.15)), float(draw.uniform(1.2, 4.5))

    def act(packets: Packets) -> None:
        slow = draw.random(len(packets)) < share
        packets.at_s = packets.at_s + slow * by * leg.packet_ms / 1000

    leg.way.append(act)


@kind("duplicates")
def duplicates(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    share, later = float(draw.uniform(0.02, 0.2)), float(draw.uniform(0.0005, 0.04))

    def act(packets: Packets) -> None:
        chosen = np.flatnonzero((draw.random(len(packets)) < share) & ~packets.lost)
        packets.copies += [(int(k), later * float(draw.uniform(0.8, 1.2))) for k in chosen]

    leg.way.append(act)


@kind("marking-absent")
def marking_absent(plan: Plan) -> None:
    """A router far from the sender takes the marking away."""
    draw = plan.draw
    leg = min(plan.legs, key=lambda one: -one.before_s)
    for one in plan.legs:
        one.dscp = 46
    leg.dscp = 0
    if leg.ttl in (64, 128, 255):
        leg.ttl -= int(draw.integers(2, 9))


@kind("marking-changed")
def marking_changed(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    before, after = (int(one) for one in draw.permutation([46, 0, 34, 8, 26])[:2])
    if draw.random() < 0.6:
        before, after = 46, 0
    for one in plan.legs:
        one.dscp = before
    at = float(draw.uniform(0.25, 0.75)) * plan.seconds

    def act(packets: Packets) -> None:
        packets.dscp[packets.at_s >= at] = after

    leg.way.append(act)


@kind("route-change")
def route_change(plan: Plan) -> None:
    draw = plan.draw
    leg = max(plan.legs, key=lambda one: one.before_s)
    steps = int(draw.choice([-3, -2, -1, 1, 2, 3, 5]))
    grows = float(draw.uniform(0.005, 0.05)) * (1 if steps > 0 else -1)
    leg.before_s = max(leg.before_s, 0.06)
    at = float(draw.uniform(0.25, 0.75)) * plan.seconds

    def act(packets: Packets) -> None:
        new = packets.sent_s >= at
        packets.ttl[new] = np.minimum(packets.ttl[new] - steps, 254)
        packets.at_s = packets.at_s + np.where(new, grows, 0.0)

    leg.way.append(act)
