"""Makes a capture of a kind and a seed, asks the findings, and says which was on top."""

import tempfile
import zlib
from dataclasses import dataclass
from itertools import product
from pathlib import Path

import numpy as np

import rtpaudit
from rtpaudit.findings.rule import Finding
from tests.faultbench import kinds_call, kinds_capture, kinds_endpoint, kinds_network, kinds_sound  # noqa: F401
from tests.faultbench.kinds import KINDS, Kind
from tests.faultbench.plan import LINKS, Plan, capture_settings, plan
from tests.faultbench.record import Made, capture


@dataclass
class Verdict:
    """What the findings said of one capture."""

    kind: str
    seed: int
    top: str
    """headline of the call in question, "" for none"""
    right: bool
    others: list[str]
    """headlines of the other calls"""
    findings: list[Finding]


def draw_of(name: str, seed: int) -> np.random.Generator:
    """Random numbers that are another's for each kind and seed."""
    return np.random.default_rng([zlib.crc32(name.encode()), seed])


def make(kind: Kind, seed: int) -> Made:
    """The capture of a fault."""
    draw = draw_of(kind.name, seed)
    chosen = plan(
        draw,
        encoding=str(draw.choice(kind.encodings)) if kind.encodings else "",
        suppression=str(draw.choice(kind.suppression)) if kind.suppression else None,
    )
    kind.spoil(chosen)
    return _with_others(draw, chosen)


def make_clean(draw: np.random.Generator, encoding: str, packet_ms: int, link: str, suppression: str) -> Made:
    """A clean control."""
    chosen = plan(draw, encoding=encoding, packet_ms=packet_ms, suppression=suppression)
    assert chosen.capture is not None
    chosen.capture.link = link
    return _with_others(draw, chosen)


def _with_others(draw: np.random.Generator, chosen: Plan) -> Made:
    """Now and then one or two good calls beside it."""
    others = [plan(draw) for _ in range(int(draw.choice([0, 0, 0, 1, 2])))]
    goes_on = chosen.far.get("capture_goes_on", 0.0)
    if goes_on and not others:
        others = [plan(draw)]
    offsets = [float(draw.uniform(0, 5)), *(float(draw.uniform(0, 20)) for _ in others)]
    if goes_on:
        others[0].seconds = chosen.seconds + goes_on
    settings = chosen.capture or capture_settings(draw)
    return capture([chosen, *others], settings, offsets)


def judge(name: str, seed: int, made: Made, accepts: frozenset[str]) -> Verdict:
    """Audit a capture and compare the headline of its call in question."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "capture"
        path.write_bytes(made.octets)
        audit = rtpaudit.audit(path)
        calls = audit.assessment.calls
        by_ssrc = {one.stream.ssrc: one.call for one in audit.assessment.streams if one.call}
    mine = {by_ssrc[ssrc] for ssrc in made.ssrcs if ssrc in by_ssrc}
    mine |= {call.id for call in calls if call.call_id and call.call_id == made.call_id}
    tops = [call.headline for call in calls if call.id in mine]
    top = tops[0] if len(tops) == 1 else f"{len(tops)} calls"
    others = [call.headline for call in calls if call.id not in mine and call.headline]
    return Verdict(name, seed, top, top in accepts, others, [one for one in audit.diagnosis if one.call in mine])


def bench(name: str, seed: int) -> Verdict:
    """One capture of one kind."""
    kind = KINDS[name]
    return judge(name, seed, make(kind, seed), kind.accepts)


def control(number: int, seed: int) -> Verdict:
    """One clean control."""
    encoding, packet_ms, link, suppression = CONTROLS[number]
    name = f"{encoding}, {packet_ms} ms, {link}, {suppression or 'no'} suppression"
    return judge(name, seed, make_clean(draw_of(name, seed), encoding, packet_ms, link, suppression), frozenset([""]))


def _controls() -> list[tuple[str, int, str, str]]:
    """Every encoding with every packet time over every link, with kinds of silence suppression in turn."""
    suppressions = ("", "pauses", "noise")
    rows = product(("PCMU", "PCMA", "G722", "L16"), (10, 20, 30, 40, 60), dict.fromkeys(LINKS))
    return [(*row, suppressions[k % 3]) for k, row in enumerate(rows) if row[0] != "L16" or row[1] <= 30]


CONTROLS = _controls()
