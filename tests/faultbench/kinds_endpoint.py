"""Faults of the ends: clocks, packet times, pacing, numbering, timestamps, payload types, digits."""

import numpy as np

from tests.faultbench.kinds import kind
from tests.faultbench.kinds_network import TALKING
from tests.faultbench.plan import Plan
from tests.faultbench.stream import Leg, Packets

G711 = ("PCMU", "PCMA")


@kind("clock-skew")
def clock_skew(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    plan.longer(38, 60)
    leg.skew_ppm = float(draw.uniform(200, 1500)) * int(draw.choice([-1, 1]))
    leg.suppression = ""


@kind("packet-time-wrong")
def packet_time_wrong(plan: Plan) -> None:
    """Another packet time than the receiver asked for (a=ptime)."""
    draw, leg = plan.draw, plan.leg()
    plan.sip = True
    asked = int(draw.choice([one for one in (10, 20, 30, 40) if one != leg.packet_ms]))
    sides = {"a": "callee", "b": "caller"}
    plan.announced_ptime = {"caller": plan.b.packet_ms, "callee": plan.a.packet_ms}
    plan.announced_ptime[sides["a" if leg is plan.a else "b"]] = asked


@kind("packet-time-change", encodings=G711, suppression=TALKING)
def packet_time_change(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    at = float(draw.uniform(0.3, 0.7)) * plan.seconds
    join = int(draw.choice([2, 3]))
    if leg.packet_ms * join > 60:
        leg.packet_ms, join = 20, 2

    def act(packets: Packets) -> None:
        first = int(np.searchsorted(packets.sent_s, at))
        count = (len(packets) - first) // join
        keep = np.concatenate([np.arange(first), first + join * np.arange(count)])
        payload = packets.payload[:first] + [
            b"".join(packets.payload[first + join * k : first + join * (k + 1)]) for k in range(count)
        ]
        sent = packets.sent_s[np.concatenate([np.arange(first), first + join * np.arange(count) + join - 1])]
        _keep(packets, keep)
        packets.payload, packets.sent_s = payload, sent
        packets.sequence = np.arange(len(packets))

    leg.sender.append(act)


def _keep(packets: Packets, rows: np.ndarray) -> None:
    packets.payload = [packets.payload[k] for k in rows.tolist()]
    for name in (
        "sent_s",
        "sequence",
        "ticks",
        "payload_type",
        "marker",
        "ssrc",
        "dscp",
        "ttl",
        "at_s",
        "lost",
        "lost_after",
    ):
        setattr(packets, name, getattr(packets, name)[rows])


@kind("sender-pacing", suppression=TALKING)
def sender_pacing(plan: Plan) -> None:
    """Packets leave several at a time."""
    draw, leg = plan.draw, plan.leg()
    leg.packet_ms = min(leg.packet_ms, 30)
    bunch = int(draw.integers(2, 1 + max(2, 160 // leg.packet_ms // 2)))
    bunch = min(bunch, 6)

    def act(packets: Packets) -> None:
        last = (np.arange(len(packets)) // bunch + 1) * bunch - 1
        last = np.minimum(last, len(packets) - 1)
        packets.sent_s = packets.sent_s[last] + (np.arange(len(packets)) % bunch) * 0.0002

    leg.sender.append(act)


@kind("sequence-fault")
def sequence_fault(plan: Plan) -> None:
    """Numbers that are skipped though no speech is missing."""
    draw, leg = plan.draw, plan.leg()
    share = float(draw.uniform(0.01, 0.1))
    most = int(draw.integers(2, 6))

    def act(packets: Packets) -> None:
        skips = (draw.random(len(packets)) < share) * draw.integers(1, most, len(packets))
        packets.sequence = packets.sequence + np.cumsum(skips)

    leg.sender.append(act)


@kind("sequence-fault/repeated")
def sequence_fault_repeated(plan: Plan) -> None:
    """A number that stands on two packets now and then."""
    draw, leg = plan.draw, plan.leg()
    share = float(draw.uniform(0.02, 0.08))

    def act(packets: Packets) -> None:
        stays = draw.random(len(packets)) < share
        stays[:5] = False
        packets.sequence = packets.sequence - np.cumsum(stays)

    leg.sender.append(act)


@kind("timestamp-fault")
def timestamp_fault(plan: Plan) -> None:
    """Timestamps that jump ahead, or back, while speech goes on."""
    draw, leg = plan.draw, plan.leg()
    count = int(draw.integers(1, 5))
    places = np.sort(draw.uniform(0.1, 0.9, count))
    by = draw.uniform(0.3, 8.0, count) * draw.choice([-1, 1], count)

    def act(packets: Packets) -> None:
        for place, jump in zip(places, by, strict=True):
            packets.ticks[int(place * len(packets)) :] += int(jump * leg.clock_hz)

    leg.sender.append(act)


@kind("timestamp-fault/rate", suppression=TALKING)
def timestamp_fault_rate(plan: Plan) -> None:
    """Timestamps that count at another rate than agreed."""
    draw, leg = plan.draw, plan.leg()
    factor = float(draw.choice([0.5, 2.0]))

    def act(packets: Packets) -> None:
        packets.ticks = (packets.ticks * factor).astype(np.int64)

    leg.sender.append(act)


@kind("source-restart")
def source_restart(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    at = float(draw.uniform(0.3, 0.7)) * plan.seconds
    pause = float(draw.uniform(0.05, 0.8))
    ssrc = int(draw.integers(1 << 32))
    numbers, ticks = int(draw.integers(5000, 60000)), int(draw.integers(1 << 31))
    same = draw.random() < 0.3

    def act(packets: Packets) -> None:
        rows = np.flatnonzero((packets.sent_s < at) | (packets.sent_s >= at + pause))
        _keep(packets, rows)
        new = packets.sent_s >= at
        packets.sequence = np.where(new, np.cumsum(new) + int((~new).sum()) + numbers, np.cumsum(~new) - 1)
        packets.ticks = packets.ticks + np.where(new, ticks, 0)
        if not same:
            packets.ssrc[new] = ssrc

    leg.sender.append(act)


@kind("payload-type-not-agreed", encodings=G711)
def payload_type_not_agreed(plan: Plan) -> None:
    """An encoding that the receiver never offered."""
    draw, leg = plan.draw, plan.leg()
    plan.sip = True
    offered = "PCMA" if leg.encoding == "PCMU" else "PCMU"
    side = "callee" if leg is plan.a else "caller"
    types = [(8 if offered == "PCMA" else 0, offered, 8000)]
    if draw.random() < 0.4:
        types.insert(0, (18, "G729", 8000))
    plan.announced_encodings[side] = types


@kind("speech-start-clipped", encodings=G711, suppression=("pauses", "noise"))
def speech_start_clipped(plan: Plan) -> None:
    """Silence suppression that opens too late."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(25, 50)
    leg.packet_ms = min(leg.packet_ms, 30)
    late = float(draw.uniform(0.09, 0.18))

    def act(packets: Packets) -> None:
        speech = packets.payload_type != 13
        starts = np.flatnonzero(packets.marker & speech)
        drop = np.zeros(len(packets), bool)
        for k in starts.tolist():
            drop |= speech & (packets.sent_s >= packets.sent_s[k]) & (packets.sent_s < packets.sent_s[k] + late)
        keep = np.flatnonzero(~drop)
        first = np.flatnonzero(np.diff(np.concatenate([[True], drop[keep - 1]]).astype(int)) != 0)
        _keep(packets, keep)
        packets.sequence = np.arange(len(packets))
        packets.marker[first[first < len(packets)]] = True

    leg.sender.append(act)


def dtmf(key: str, seconds: float, rate: int, level: float = 0.12) -> np.ndarray:
    """Two tones of a key (ITU-T Q.23)."""
    rows, columns = (697, 770, 852, 941), (1209, 1336, 1477, 1633)
    place = "123A456B789C*0#D".index(key)
    t = np.arange(int(seconds * rate)) / rate
    tone = level * (np.sin(2 * np.pi * rows[place // 4] * t) + np.sin(2 * np.pi * columns[place % 4] * t))
    ramp = int(0.002 * rate)
    tone[:ramp] *= np.linspace(0, 1, ramp)
    tone[-ramp:] *= np.linspace(1, 0, ramp)
    return tone


def send_events(leg: Leg, moments: list[tuple[float, str]], length_s: float, event_type: int = 101) -> None:
    """Telephone events in place of audio packets (RFC 4733)."""

    def act(packets: Packets) -> None:
        for moment, key in moments:
            code = "0123456789*#ABCD".index(key)
            first = int(np.searchsorted(packets.sent_s, moment))
            count = max(3, int(length_s * 1000 / leg.packet_ms))
            for k in range(count + 3):
                row = first + k
                if row >= len(packets):
                    return
                duration = min(k + 1, count) * leg.step_ticks
                end = k >= count - 1
                packets.payload[row] = bytes([code, end << 7 | 10]) + duration.to_bytes(2, "big")
                packets.payload_type[row] = event_type
                packets.ticks[row] = packets.ticks[first]
                packets.marker[row] = k == 0

    leg.sender.append(act)


@kind("digits-twice", encodings=G711, suppression=TALKING)
def digits_twice(plan: Plan) -> None:
    """Keys that go as events and are still to be heard just before."""
    draw, leg = plan.draw, plan.leg()
    leg.packet_ms = min(leg.packet_ms, 30)
    count = int(draw.integers(2, 6))
    keys = [str(draw.choice(list("0123456789*#"))) for _ in range(count)]
    moments = [3.0 + 0.7 * k + float(draw.uniform(0, 0.2)) for k in range(count)]
    leak = float(draw.uniform(0.06, 0.12))

    def sounds(sound: np.ndarray, rate: int) -> np.ndarray:
        sound = sound.copy()
        for key, moment in zip(keys, moments, strict=True):
            tone = dtmf(key, leak + 0.1, rate)
            first = int((moment - leg.begins_s - leak) * rate)
            sound[first : first + len(tone)] = tone
        return sound

    leg.sound.append(sounds)
    send_events(leg, list(zip(moments, keys, strict=True)), 0.12)


@kind("rtcp-contradicts")
def rtcp_contradicts(plan: Plan) -> None:
    """A far receiver that reports numbers which were never sent."""
    draw, leg = plan.draw, plan.leg()
    plan.rtcp = True
    plan.longer(25, 50)
    plan.wrong_highest["a" if leg is plan.a else "b"] = int(draw.integers(5, 30)) * 1000
