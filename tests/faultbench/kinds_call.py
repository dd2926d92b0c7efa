"""Faults of the call: media that is missing, late, one way, or goes on; set-up and release."""

import numpy as np

from tests.faultbench.kinds import kind
from tests.faultbench.plan import Plan

G711 = ("PCMU", "PCMA")


@kind("no-media")
def no_media(plan: Plan) -> None:
    plan.sip = True
    plan.rtcp = False
    for leg in plan.legs:
        leg.ends_s = -1.0
    if plan.draw.random() < 0.5:
        plan.announces["caller"] = (
            f"10.{plan.draw.integers(255)}.{plan.draw.integers(255)}.{plan.draw.integers(2, 250)}"
        )


@kind("no-media/early-only")
def no_media_early(plan: Plan) -> None:
    """Ringing tone before the answer, and nothing after it."""
    plan.sip = True
    plan.rtcp = False
    plan.ring_s = float(plan.draw.uniform(4, 8))
    plan.a.ends_s = -1.0
    plan.b.begins_s, plan.b.ends_s = -plan.ring_s + 1.0, -0.2


@kind("one-way-media")
def one_way_media(plan: Plan) -> None:
    plan.sip = True
    plan.rtcp = bool(plan.draw.random() < 0.5)
    leg = plan.leg()
    leg.ends_s = -1.0


@kind("one-way-media/private-address")
def one_way_private(plan: Plan) -> None:
    """One side announces an address of its own network, so that the other sends into nowhere: it never passes here."""
    plan.sip, plan.rtcp = True, False
    draw, leg = plan.draw, plan.leg()
    leg.ends_s = -1.0
    side = "callee" if leg is plan.a else "caller"
    plan.announces[side] = f"192.168.{draw.integers(255)}.{draw.integers(2, 250)}"


@kind("one-way-media/unreachable")
def one_way_unreachable(plan: Plan) -> None:
    """One side's host answers that nobody listens at the port."""
    plan.sip = True
    plan.rtcp = False
    leg = plan.leg()
    plan.other(leg).ends_s = -1.0
    plan.port_unreachable = "a" if leg is plan.a else "b"


@kind("media-late")
def media_late(plan: Plan) -> None:
    plan.sip = True
    draw, leg = plan.draw, plan.leg()
    leg.begins_s = float(draw.uniform(1.8, 5.0))
    leg.suppression = ""


@kind("setup-slow")
def setup_slow(plan: Plan) -> None:
    plan.sip = True
    plan.first_word_s = float(plan.draw.uniform(8.5, 15.0))
    plan.ring_s = plan.first_word_s + float(plan.draw.uniform(1.0, 4.0))


@kind("release-missing")
def release_missing(plan: Plan) -> None:
    """Media ends on both sides, and nobody says good-bye, though the capture goes on."""
    plan.sip = True
    plan.bye = False
    plan.far["capture_goes_on"] = float(plan.draw.uniform(20, 60))


@kind("media-after-release")
def media_after_release(plan: Plan) -> None:
    plan.sip = True
    plan.bye_early_s = float(plan.draw.uniform(4.0, 9.0))
    plan.longer(20, 40)
    if plan.draw.random() < 0.5:
        leg = plan.leg()
        leg.ends_s = plan.seconds - plan.bye_early_s


@kind("hold-not-released")
def hold_not_released(plan: Plan) -> None:
    plan.sip = True
    plan.longer(25, 45)
    at = float(plan.draw.uniform(5, 10))
    plan.hold = (at, np.inf)
    plan.b.ends_s = at
    if plan.draw.random() < 0.6:
        plan.a.ends_s = at + float(plan.draw.uniform(0.0, 0.3))


@kind("encodings-differ")
def encodings_differ(plan: Plan) -> None:
    """PCMU one way, PCMA the other, each as it was agreed."""
    plan.sip = True
    for leg in plan.legs:
        leg.clock_hz, leg.sampling_hz = 8000, 8000
        leg.packet_ms = min(leg.packet_ms, 40)
    one, other = plan.legs if plan.draw.random() < 0.5 else plan.legs[::-1]
    one.encoding, one.payload_type = "PCMU", 0
    other.encoding, other.payload_type = "PCMA", 8
    both = [(0, "PCMU", 8000), (8, "PCMA", 8000)]
    plan.announced_encodings = {"caller": both, "callee": both}
