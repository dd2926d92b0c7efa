"""Octets in, a voice quality report out (RFC 6035 section 4.6): what an endpoint says of the media it received."""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import name_address, printable, user_of
from rtpaudit.units import NS_PER_S

NAN = float("nan")
MAX_OCTETS = 65_536
MAX_SHOWN = 256

CONTENT_TYPE = "application/vq-rtcpxr"

_FOLD = re.compile(r"\n[ \t]+")
_PAIR = re.compile(r'([A-Za-z-]{1,32})\s{0,8}=\s{0,8}(?:"([^"]{0,512})"|(\S{1,512}))')
_KINDS = {"vqsessionreport": "session", "vqintervalreport": "interval", "vqalertreport": "alert"}

_RANGES: dict[str, tuple[str, float, float]] = {
    # line and parameter: (field, lowest, highest), as the comments of the grammar give them
    "sessiondesc pt": ("payload_type", 0, 127),
    "sessiondesc sr": ("sampling_rate_hz", 1, 192_000),
    "sessiondesc fd": ("frame_duration_ms", 0, 9999),
    "sessiondesc fpp": ("frames_per_packet", 0, 99),
    "sessiondesc pps": ("packets_per_second", 0, 99_999),
    "sessiondesc plc": ("packet_loss_concealment", 0, 3),
    "jitterbuffer jba": ("playout_adaptive", 0, 3),
    "jitterbuffer jbr": ("playout_rate", 0, 15),
    "jitterbuffer jbn": ("playout_nominal_ms", 0, 65_535),
    "jitterbuffer jbm": ("playout_maximum_ms", 0, 65_535),
    "jitterbuffer jbx": ("playout_absolute_ms", 0, 65_535),
    "packetloss nlr": ("loss_pct", 0, 100),
    "packetloss jdr": ("discard_pct", 0, 100),
    "burstgaploss bld": ("burst_density_pct", 0, 100),
    "burstgaploss bd": ("burst_duration_ms", 0, 3_600_000),
    "burstgaploss gld": ("gap_density_pct", 0, 100),
    "burstgaploss gd": ("gap_duration_ms", 0, 3_600_000),
    "burstgaploss gmin": ("gap_threshold_packets", 1, 255),
    "delay rtd": ("round_trip_ms", 0, 65_535),
    "delay esd": ("end_system_delay_ms", 0, 65_535),
    "delay owd": ("one_way_delay_ms", 0, 65_535),
    "delay sowd": ("symmetric_one_way_delay_ms", 0, 65_535),
    "delay iaj": ("jitter_ms", 0, 65_535),
    "delay maj": ("mean_absolute_jitter_ms", 0, 65_535),
    "signal sl": ("signal_level_dbm0", -99, 99),
    "signal nl": ("noise_level_dbm0", -99, 99),
    "signal rerl": ("echo_return_loss_db", 0, 999),
    "qualityest rlq": ("r_listening", 0, 120),
    "qualityest rcq": ("r_factor", 0, 120),
    "qualityest extri": ("r_external_in", 0, 120),
    "qualityest extro": ("r_external_out", 0, 120),
    "qualityest moslq": ("mos_lq", 0, 4.9),
    "qualityest moscq": ("mos_cq", 0, 4.9),
}


@dataclass(frozen=True, slots=True)
class QualityMetrics:
    """What was measured of one stream; NaN where nothing, or nothing plausible, is said."""

    started_ns: int | None = None
    stopped_ns: int | None = None
    encoding: str = ""
    estimated_by: str = ""
    """algorithm of the ratings, such as P.564"""
    payload_type: float = NAN
    sampling_rate_hz: float = NAN
    frame_duration_ms: float = NAN
    frames_per_packet: float = NAN
    packets_per_second: float = NAN
    packet_loss_concealment: float = NAN
    playout_adaptive: float = NAN
    """RFC 3611 section 4.7.6: 3 adaptive, 2 not"""
    playout_rate: float = NAN
    playout_nominal_ms: float = NAN
    playout_maximum_ms: float = NAN
    playout_absolute_ms: float = NAN
    loss_pct: float = NAN
    discard_pct: float = NAN
    burst_density_pct: float = NAN
    burst_duration_ms: float = NAN
    gap_density_pct: float = NAN
    gap_duration_ms: float = NAN
    gap_threshold_packets: float = NAN
    round_trip_ms: float = NAN
    end_system_delay_ms: float = NAN
    one_way_delay_ms: float = NAN
    symmetric_one_way_delay_ms: float = NAN
    jitter_ms: float = NAN
    mean_absolute_jitter_ms: float = NAN
    signal_level_dbm0: float = NAN
    noise_level_dbm0: float = NAN
    echo_return_loss_db: float = NAN
    r_listening: float = NAN
    r_factor: float = NAN
    """conversational (RCQ)"""
    r_external_in: float = NAN
    r_external_out: float = NAN
    mos_lq: float = NAN
    mos_cq: float = NAN
    set_aside: tuple[str, ...] = ()
    """what was said outside its range and so is not used"""


@dataclass(frozen=True, slots=True)
class MediaEnd:
    """One end of the stream that is reported on."""

    address: str = ""
    port: int = 0
    ssrc: int | None = None


@dataclass(frozen=True, slots=True)
class QualityReport:
    """One report: ``local`` on the stream from ``remote_end`` to ``local_end``, ``remote`` on the other way."""

    kind: str
    """session, interval or alert"""
    final: bool
    """the last one of its call (CallTerm)"""
    call_id: str
    """of the dialog that is reported on, as the reporter names it"""
    dialog_id: str
    """Call-ID of DialogID, "" where there is none"""
    local_id: str
    """user part of the reporter"""
    remote_id: str
    local_end: MediaEnd
    remote_end: MediaEnd
    local: QualityMetrics
    remote: QualityMetrics | None = None
    alert: str = ""
    """what an alert was raised for"""
    time_ns: int = 0
    """arrival"""
    source: str = ""
    """address and port that sent the report"""


def parse_quality_report(octets: bytes, time_ns: int = 0, source: str = "") -> QualityReport:
    """A report out of a body of type application/vq-rtcpxr (RFC 6035 section 4.6.1).

    Raises
    ------
    MalformedPacket
        Where the first line is none of the three kinds, or the local metrics are missing.
    """
    if len(octets) > MAX_OCTETS:
        raise MalformedPacket(f"quality report of {len(octets)} octets")
    text = octets.decode("utf-8", "backslashreplace").replace("\r\n", "\n").replace("\r", "\n")
    lines = [line.partition(":") for line in printable(_FOLD.sub(" ", text)).strip("\n").split("\n")]
    kind = _KINDS.get(lines[0][0].strip().lower())
    said: dict[str, dict[str, str]] = {"": {}, "localmetrics": {}, "remotemetrics": {}}
    section = ""
    for name, _, value in lines[1:]:
        folded = name.strip().lower()
        if folded in said and not value.strip():
            section = folded
        else:
            home = "" if folded == "dialogid" else section
            said[home].setdefault(folded, value.strip())
    if kind is None or not said["localmetrics"]:
        raise MalformedPacket(f"quality report that begins {lines[0][0][:40]!r}")
    head = said[""]
    return QualityReport(
        kind=kind,
        final=lines[0][2].strip().lower() == "callterm",
        call_id=head.get("callid", "")[:MAX_SHOWN],
        dialog_id=head.get("dialogid", "").partition(";")[0].strip()[:MAX_SHOWN],
        local_id=_party(head.get("localid", "")),
        remote_id=_party(head.get("remoteid", "")),
        local_end=_media_end(head.get("localaddr", "")),
        remote_end=_media_end(head.get("remoteaddr", "")),
        local=_metrics(said["localmetrics"]),
        remote=_metrics(said["remotemetrics"]) if said["remotemetrics"] else None,
        alert=lines[0][2].strip()[:MAX_SHOWN] if kind == "alert" else "",
        time_ns=time_ns,
        source=source,
    )


def _pairs(text: str) -> dict[str, str]:
    found: dict[str, str] = {}
    for name, quoted, plain in _PAIR.findall(text):
        found.setdefault(name.lower(), quoted or plain)
    return found


def _party(value: str) -> str:
    uri = name_address(value).uri
    return (user_of(uri) or uri)[:MAX_SHOWN]


def _media_end(text: str) -> MediaEnd:
    said = _pairs(text)
    port, ssrc = said.get("port", ""), said.get("ssrc", "").lower().removeprefix("0x")
    return MediaEnd(
        address=said.get("ip", "")[:64].lower(),
        port=int(port) if port.isascii() and port.isdecimal() and len(port) <= 5 else 0,
        ssrc=int(ssrc, 16) if re.fullmatch("[0-9a-f]{1,8}", ssrc) else None,
    )


def _metrics(lines: dict[str, str]) -> QualityMetrics:
    numbers: dict[str, float] = {}
    set_aside: list[str] = []
    for key, value in _named_values(lines):
        field, lowest, highest = _RANGES[key]
        number = _number(value)
        if lowest <= number <= highest:
            numbers[field] = number
        else:
            set_aside.append(f"{key.partition(' ')[2].upper()}={value[:20]!r}")
    times, quality = _pairs(lines.get("timestamps", "")), _pairs(lines.get("qualityest", ""))
    return QualityMetrics(
        started_ns=_time_ns(times.get("start", "")),
        stopped_ns=_time_ns(times.get("stop", "")),
        encoding=_pairs(lines.get("sessiondesc", "")).get("pd", "")[:64],
        estimated_by=quality.get("qoeestalg", quality.get("rcqestalg", ""))[:64],
        set_aside=tuple(set_aside),
        **numbers,
    )


def _named_values(lines: dict[str, str]) -> Iterator[tuple[str, str]]:
    for name in dict.fromkeys(key.partition(" ")[0] for key in _RANGES):
        for parameter, value in _pairs(lines.get(name, "")).items():
            if f"{name} {parameter}" in _RANGES:
                yield f"{name} {parameter}", value


def _number(text: str) -> float:
    # A codec that changes its rate gives the lowest and the highest ("8000;16000").
    found = re.fullmatch(r"(-?[0-9]{1,9}(?:\.[0-9]{1,6})?)(?:;[0-9;]{1,66})?", text)
    return float(found[1]) if found else NAN


def _time_ns(text: str) -> int | None:
    """A time of RFC 3339, None where it is none (4.6.1: only UTC)."""
    try:
        moment = datetime.fromisoformat(text[:40])
    except ValueError:
        return None
    moment = moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment
    if not 1970 < moment.year < 2200:
        return None
    return int(moment.timestamp()) * NS_PER_S + moment.microsecond * 1000
