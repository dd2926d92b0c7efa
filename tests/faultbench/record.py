"""A capture with one call in question and, now and then, others beside it: plans become frames, frames a file."""

import struct
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from tests import craft
from tests.faultbench.plan import CaptureSettings, Frames, Plan
from tests.faultbench.signal import Dialog, control, datagram, unreachable
from tests.faultbench.stream import Leg, Packets, packets_of, travel
from tests.faultbench.voices import conversation


@dataclass
class Made:
    """A capture with its truth."""

    octets: bytes
    ssrcs: tuple[int, int]
    call_id: str
    """of the call in question; "" without signalling"""


def capture(plans: list[Plan], settings: CaptureSettings, offsets_s: list[float]) -> Made:
    """The capture of some calls; the first is the one in question."""
    frames: Frames = []
    call_ids = []
    for one, offset in zip(plans, offsets_s, strict=True):
        own: Frames = []
        call_ids.append(frames_of(one, own, settings.start_s, offset))
        frames += own
    frames.sort(key=lambda frame: frame[0])
    for act in plans[0].on_capture:
        frames = act(plans[0], frames)
    return Made(written(frames, settings, plans[0]), (plans[0].a.ssrc, plans[0].b.ssrc), call_ids[0])


def frames_of(plan: Plan, frames: Frames, origin_s: float, offset_s: float) -> str:
    """All frames of a call; returns its Call-ID."""
    draw = plan.draw
    sound = conversation(
        draw, plan.seconds, (plan.a.sampling_hz, plan.b.sampling_hz),
        (plan.a.level_dbov, plan.b.level_dbov), (plan.a.noise_dbov, plan.b.noise_dbov),
    )  # fmt: skip
    sound = plan_echo(plan, sound)
    answer_s = offset_s + (plan.ring_s if plan.sip else 0.0)
    start_s = answer_s + 0.05
    packets: dict[str, Packets] = {}
    for name, leg, said in (("a", plan.a, sound[0]), ("b", plan.b, sound[1])):
        packets[name] = packets_of(leg, said, draw)
        travel(leg, packets[name], draw)
        media_frames(leg, packets[name], frames, start_s, draw)
    if plan.rtcp:
        control(plan, frames, origin_s, start_s, packets)
    if plan.port_unreachable:
        _refuse(plan, frames)
    if not plan.sip:
        return ""
    dialog = Dialog(plan, frames)
    dialog.set_up(offset_s, answer_s)
    if plan.hold is not None:
        dialog.change(start_s + plan.hold[0], 2, "sendonly")
        if np.isfinite(plan.hold[1]):
            dialog.change(start_s + plan.hold[1], 3, "sendrecv")
    if plan.bye:
        dialog.hang_up(start_s + plan.seconds - plan.bye_early_s + (0.05 if plan.bye_early_s == 0 else 0.0))
    return dialog.call_id


def plan_echo(plan: Plan, sound):
    """What one side says comes back in what the other sends, where the plan says so."""
    echo = plan.far.get("echo_loss_db")
    if echo is None:
        return sound
    from tests.faultbench.voices import room_echo

    said, other = sound
    if plan.far.get("echo_of_callee"):
        back = room_echo(other, plan.b.sampling_hz, plan.far["echo_delay_s"], echo)
        return said + back[: len(said)], other
    back = room_echo(said, plan.a.sampling_hz, plan.far["echo_delay_s"], echo)
    return said, other + back[: len(other)]


def media_frames(leg: Leg, packets: Packets, frames: Frames, start_s: float, draw: np.random.Generator) -> None:
    """RTP packets of a leg that pass the capture point."""
    counter = int(draw.integers(1 << 16))
    numbers = {"count": counter + np.arange(len(packets)), "random": draw.integers(0, 1 << 16, len(packets))}
    identification = numbers.get(leg.identification, np.zeros(len(packets), int))
    made: dict[int, bytes] = {}

    def packet(k: int) -> bytes:
        if k not in made:
            head = struct.pack(
                "!BBHII", 0x80, int(packets.marker[k]) << 7 | int(packets.payload_type[k]),
                (leg.first_sequence + int(packets.sequence[k])) & 0xFFFF,
                (leg.first_ticks + int(packets.ticks[k])) & 0xFFFFFFFF, int(packets.ssrc[k]),
            )  # fmt: skip
            made[k] = datagram(
                head + packets.payload[k],
                leg.source,
                leg.destination,
                int(packets.dscp[k]),
                int(packets.ttl[k]),
                int(identification[k]),
            )
        return made[k]

    for k in np.flatnonzero(~packets.lost).tolist():
        frames.append((start_s + float(packets.at_s[k]), packet(k), "rtp"))
    for k, later in packets.copies:
        frames.append((start_s + float(packets.at_s[k]) + later, packet(k), "rtp"))


def _refuse(plan: Plan, frames: Frames) -> None:
    leg = plan.a if plan.port_unreachable == "a" else plan.b
    if ":" in leg.source[0]:
        return
    source, port = craft.ip_address(leg.source[0]).packed, struct.pack("!H", leg.source[1])
    mine = [one for one in frames if one[2] == "rtp" and one[1][12:16] == source and one[1][20:22] == port]
    for at, packet, _ in mine[::5][:40]:
        frames.append((at + leg.after_s * 2, unreachable(packet, leg.destination[0], leg.source[0], 60), "icmp"))


def written(frames: Frames, settings: CaptureSettings, plan: Plan) -> bytes:
    """The file."""
    link, number = _LINKS[settings.link]
    vlan = int(plan.draw.integers(2, 4000))
    whole = [link(packet, vlan) for _, packet, _ in frames]
    originals = [len(one) for one in whole]
    if settings.snap:
        whole = [one[: settings.snap] for one in whole]
    times = [int((settings.start_s + at) * 1e6) * 1000 for at, _, _ in frames]
    if settings.container == "pcapng" or settings.dropped is not None:
        octets = craft.pcapng(whole, times, originals=originals, link_type=number)
        if settings.dropped is not None:
            octets += craft.pcapng_statistics(0, received=len(whole) + settings.dropped, dropped=settings.dropped)
        return octets
    return craft.pcap(
        whole, times, originals=originals, link_type=number, snap_length=settings.snap or 65535,
        nanoseconds=settings.container == "pcap-ns", big_endian=settings.container == "pcap-be",
    )  # fmt: skip


def _type(packet: bytes) -> int:
    return 0x86DD if packet[0] >> 4 == 6 else 0x0800


_LINKS = {
    "ethernet": (lambda packet, vlan: craft.ethernet(packet, _type(packet)), 1),
    "vlan": (lambda packet, vlan: craft.ethernet(packet, _type(packet), [vlan]), 1),
    "qinq": (lambda packet, vlan: craft.ethernet(packet, _type(packet), [100, vlan]), 1),
    "cooked": (lambda packet, vlan: struct.pack("!HHHQH", 0, 1, 6, 0x0200000000010000, _type(packet)) + packet, 113),
    "cooked2": (
        lambda packet, vlan: struct.pack("!HHIHBBQ", _type(packet), 0, 3, 1, 0, 6, 0x0200000000010000) + packet,
        276,
    ),
    "raw": (lambda packet, vlan: packet, 101),
    "null": (lambda packet, vlan: struct.pack("<I", 30 if packet[0] >> 4 == 6 else 2) + packet, 0),
}


def save(made: Made, path: Path) -> None:
    """Write a capture to look at."""
    path.write_bytes(made.octets)
