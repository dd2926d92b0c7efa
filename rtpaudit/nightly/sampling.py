"""Samples: which captures of a night are drawn, the same on every run with the same seed, and how many there were."""

import io
import math
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, tzinfo
from itertools import islice
from tempfile import NamedTemporaryFile

import numpy as np

from rtpaudit.capture.compressed import Plain, compression
from rtpaudit.capture.damage import DamageLog
from rtpaudit.capture.frames import Frames
from rtpaudit.capture.recognise import container_of
from rtpaudit.errors import RtpAuditError, UnusableArguments
from rtpaudit.nightly.calendar import NS_PER_S, night_of
from rtpaudit.nightly.identity import glance, lot_of
from rtpaudit.nightly.routing import Router, Way
from rtpaudit.nightly.sources import Found

STRATA = ("", "route", "hour")
ALL = "all"
NO_ROUTE = "no route"
_PEELED = 1 << 18


@dataclass(frozen=True, slots=True)
class Sampling:
    """What the user asked for: a share of each night's captures, or a number of them."""

    share: float | None = None
    captures: int | None = None
    seed: int = 0
    by: str = ""
    """one of STRATA"""


@dataclass(frozen=True, slots=True)
class Candidate:
    """A capture that may be drawn."""

    found: Found
    lot: int
    night: str
    stratum: str


@dataclass(frozen=True, slots=True)
class Draw:
    """How many captures of a night's stratum were there, and how many were drawn."""

    night: str
    stratum: str
    population: int
    drawn: int
    seed: int


def parse_share(text: str) -> float:
    """A share as people write it (``5%``, ``0.05``).

    Raises
    ------
    UnusableArguments
        If it is none, or not above 0 and up to 1.
    """
    try:
        share = float(text[:-1]) / 100.0 if text.endswith("%") else float(text)
    except ValueError:
        share = math.nan
    if not 0.0 < share <= 1.0:
        raise UnusableArguments(f"--share {text} is no share: write it as 5% or 0.05, up to 100%")
    return share


def draw(candidates: Iterable[Candidate], sampling: Sampling) -> tuple[list[Candidate], list[Draw]]:
    """The captures with the lowest lots of each night and stratum, and from how many they were drawn."""
    nights: dict[str, dict[str, list[Candidate]]] = defaultdict(lambda: defaultdict(list))
    for one in candidates:
        nights[one.night][one.stratum].append(one)
    drawn: list[Candidate] = []
    draws: list[Draw] = []
    for night, strata in sorted(nights.items()):
        counts = _counts([len(strata[name]) for name in sorted(strata)], sampling)
        for name, count in zip(sorted(strata), counts, strict=True):
            drawn += sorted(strata[name], key=lambda one: (one.lot, one.found.address))[:count]
            draws.append(Draw(night, name, len(strata[name]), count, sampling.seed))
    return drawn, draws


def _counts(populations: Sequence[int], sampling: Sampling) -> list[int]:
    """How many to draw of each stratum: its share, rounded up, or its part of the whole by largest remainders."""
    if sampling.share is not None:
        # A hair less, so that 5 % of 100 is 5 whatever the last bit of the product.
        return [min(math.ceil(size * sampling.share - 1e-9), size) for size in populations]
    total = sum(populations)
    wanted = min(sampling.captures or 0, total)
    exact = [wanted * size / total for size in populations]
    counts = [math.floor(one) for one in exact]
    for place in sorted(range(len(exact)), key=lambda k: (counts[k] - exact[k], k))[: wanted - sum(counts)]:
        counts[place] += 1
    return counts


def candidate(found: Found, sampling: Sampling, router: Router, zone: tzinfo | None) -> Candidate:
    """A capture with its lot, its night and its stratum, from a glance at both its ends."""
    try:
        octets = glance(found)
    except OSError:
        octets = b""
    frames = _first_frames(octets)
    moment = found.changed_ns if frames is None else int(frames.time_ns[0])
    stratum = ALL
    if sampling.by == "hour":
        stratum = f"{datetime.fromtimestamp(moment // NS_PER_S, UTC).astimezone(zone).hour:02d} h"
    elif sampling.by == "route":
        stratum = _route(octets, frames, router) or NO_ROUTE
    return Candidate(found, lot_of(octets, found.size, sampling.seed), night_of(moment, zone).isoformat(), stratum)


def _first_frames(octets: bytes) -> Frames | None:
    """The first frames of a capture of which only the first octets are at hand."""
    plain = _plain(octets)
    container = container_of(plain)
    if not container:
        return None
    columns = np.frombuffer(plain, np.uint8)
    log = DamageLog("")
    if container == "pcap":
        from rtpaudit.capture.pcap import PcapReader

        frames = next(iter(PcapReader(columns, log).batches(64)), None)
    else:
        from rtpaudit.capture.pcapng import PcapngReader

        frames = next(iter(PcapngReader(columns, log).batches(64)), None)
    return frames if frames is not None and len(frames) else None


def _plain(octets: bytes) -> bytes:
    name = compression(octets)
    if not name:
        return octets
    pieces = Plain(io.BytesIO(octets), name)
    return b"".join(islice(pieces, _PEELED // (1 << 16)))


def _route(octets: bytes, frames: Frames | None, router: Router) -> str:
    if frames is None:
        return ""
    if router.reads_signalling:
        return router.route(_way_by_audit(_plain(octets)))
    from rtpaudit.decode import Decoder

    decoder, addresses, vlans = Decoder(), set(), set()
    for packets in decoder.decode(frames, ""):
        vlans |= {int(one) for one in packets.vlan if one}
    for flow in range(len(decoder.flows)):
        addresses |= {decoder.flows.source_text(flow), decoder.flows.destination_text(flow)}
    return router.route(Way(addresses=frozenset(addresses), vlans=frozenset(vlans)))


def _way_by_audit(plain: bytes) -> Way:
    """What the first octets of a capture say when they are audited on their own."""
    from rtpaudit.walk import audit

    with NamedTemporaryFile(prefix="rtpaudit-", suffix=".pcap") as file:
        file.write(plain)
        file.flush()
        try:
            tables = audit(file.name).tables
        except RtpAuditError:
            return Way()
    calls, streams = tables["calls"], tables["streams"]
    return Way(
        addresses=frozenset({*streams["source"].dropna(), *streams["destination"].dropna()}),
        numbers=tuple({*calls["caller"].dropna(), *calls["callee"].dropna()}),
        signalling=tuple(tables["signalling"]["line"].dropna()),
    )
