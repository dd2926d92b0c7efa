"""Faults of the capture: drops, copies, cuts, a clock that steps, a direction that it does not see."""

from tests.faultbench.kinds import kind
from tests.faultbench.kinds_network import TALKING, places
from tests.faultbench.plan import Frames, Plan


@kind("capture-drops", suppression=TALKING)
def capture_drops(plan: Plan) -> None:
    """The capture host misses what passes at some moments, and counts it."""
    draw = plan.draw
    count = int(draw.integers(3, 9))
    moments, lengths = places(draw, plan, count), draw.uniform(0.08, 0.4, count)
    plan.rtcp = True

    def act(plan: Plan, frames: Frames) -> Frames:
        first = frames[0][0]
        dropped = [
            any(first + at <= one[0] < first + at + length for at, length in zip(moments, lengths, strict=True))
            for one in frames
        ]
        if plan.capture is not None:
            plan.capture.dropped = sum(dropped)
        return [one for one, gone in zip(frames, dropped, strict=True) if not gone or one[2] in ("sip", "rtcp")]

    plan.on_capture.append(act)


@kind("capture-drops/denied")
def capture_drops_denied(plan: Plan) -> None:
    """Single frames that the capture misses and the far receivers report as received."""
    draw = plan.draw
    plan.rtcp = True
    plan.longer(25, 50)
    share = float(draw.uniform(0.02, 0.08))

    def act(plan: Plan, frames: Frames) -> Frames:
        gone = draw.random(len(frames)) < share
        return [one for one, lost in zip(frames, gone, strict=True) if not lost or one[2] != "rtp"]

    plan.on_capture.append(act)


@kind("capture-one-way")
def capture_one_way(plan: Plan) -> None:
    """The capture sees only what one side sends."""
    leg = plan.leg()
    plan.rtcp = True
    plan.proxy = ""
    host = leg.source[0]

    def act(plan: Plan, frames: Frames) -> Frames:
        return [one for one in frames if _source(one[1]) == host]

    plan.on_capture.append(act)


def _source(packet: bytes) -> str:
    from ipaddress import ip_address

    return str(ip_address(packet[8:24] if packet[0] >> 4 == 6 else packet[12:16]))


@kind("capture-doubled")
def capture_doubled(plan: Plan) -> None:
    """A mirror that copies each frame where it comes in and where it goes out."""
    draw = plan.draw
    lag = float(draw.uniform(0.00001, 0.0008))
    routed = draw.random() < 0.4
    one_way = plan.leg().source[0] if draw.random() < 0.3 else ""

    def act(plan: Plan, frames: Frames) -> Frames:
        twice = []
        for at, packet, what in frames:
            twice.append((at, packet, what))
            if not one_way or _source(packet) == one_way:
                twice.append((at + lag, _next_hop(packet) if routed else packet, what))
        return sorted(twice, key=lambda one: one[0])

    plan.on_capture.append(act)


def _next_hop(packet: bytes) -> bytes:
    place = 7 if packet[0] >> 4 == 6 else 8
    return packet[:place] + bytes([packet[place] - 1]) + packet[place + 1 :]


@kind("capture-cut")
def capture_cut(plan: Plan) -> None:
    assert plan.capture is not None
    plan.sip = False
    for leg in plan.legs:
        leg.packet_ms = max(leg.packet_ms, 20)
    plan.capture.snap = int(plan.draw.choice([96, 110, 128]))


@kind("capture-clock-step")
def capture_clock_step(plan: Plan) -> None:
    """Somebody sets the clock of the capture host."""
    draw = plan.draw
    at = float(draw.uniform(0.3, 0.7)) * plan.seconds + (plan.ring_s if plan.sip else 0)
    step = float(draw.uniform(0.08, 3.0)) * int(draw.choice([-1, 1]))
    for leg in plan.legs:
        leg.suppression = "" if draw.random() < 0.7 else leg.suppression

    def act(plan: Plan, frames: Frames) -> Frames:
        first = frames[0][0]
        return [(when + (step if when - first >= at else 0.0), packet, what) for when, packet, what in frames]

    plan.on_capture.append(act)
