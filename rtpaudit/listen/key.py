"""The key of a listening check: what each clip is, kept apart from what the listeners get."""

import csv
import hashlib
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from datetime import UTC, datetime, timedelta
from pathlib import Path

from rtpaudit.errors import UnusableArguments
from rtpaudit.listen.clips import Clip
from rtpaudit.report.rows import csv_cell
from rtpaudit.units import NS_PER_S

KEY = "key.csv"
MOST_OCTETS = 4 << 20
NAN = float("nan")

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


@dataclass(frozen=True, slots=True)
class KeyRow:
    """One clip. Each field is a column."""

    check: str
    """id of the listening check, the same in the sheet and in the votes"""
    clip: str
    """name of its file without the ending"""
    kind: str
    """worst or anchor"""
    reason: str
    call: str
    stream: str
    capture: str
    speaker: str
    """caller or callee"""
    started: str
    """capture time at which the clip begins, UTC"""
    from_s: float
    """the same from the beginning of the stream's sound"""
    duration_s: float
    encoding: str
    sampling_rate_hz: int
    packets_expected: int
    packets_lost: int
    packets_discarded: int
    burst_ratio: float
    r_factor: float
    """by the packets of the clip, without delay"""
    predicted_mos: float
    level_before_dbov: float
    level_dbov: float
    gain_db: float
    limited_db: float


COLUMNS = tuple(one.name for one in fields(KeyRow))


def key_rows(clips: Sequence[Clip], check: str) -> list[KeyRow]:
    """Rows of the key, in the order of the clips."""
    return [_row(clip, check, name) for clip, name in zip(clips, clip_names(len(clips)), strict=True)]


def clip_names(count: int) -> list[str]:
    """Names that tell nothing but a place in the order."""
    return [f"clip-{number:02d}" for number in range(1, count + 1)]


def check_id(clips: Sequence[Clip]) -> str:
    """Id of a listening check: the same clips in the same order have the same."""
    digest = hashlib.sha256()
    for clip in clips:
        digest.update(clip.levelled.samples.tobytes())
    return digest.hexdigest()[:12]


def key_lines(rows: Sequence[KeyRow]) -> list[str]:
    """The key as lines of CSV."""
    return [",".join(COLUMNS), *(",".join(_cell(getattr(row, name)) for name in COLUMNS) for row in rows)]


def read_key(path: Path) -> dict[str, KeyRow]:
    """The rows of a key by clip. UnusableArguments where it is none."""
    try:
        with open(path, "rb") as file:
            text = file.read(MOST_OCTETS + 1).decode("utf-8-sig")
    except OSError as fault:
        raise UnusableArguments(f"{path}: cannot be read: {fault.strerror}") from fault
    except UnicodeDecodeError as fault:
        raise UnusableArguments(f"{path}: is no key of a listening check") from fault
    table = csv.DictReader(text.splitlines())
    try:
        if len(text) > MOST_OCTETS or not set(COLUMNS) <= set(table.fieldnames or ()):
            raise UnusableArguments(f"{path}: is no key of a listening check; give the {KEY} that was written with it")
        rows = [_read_row(path, number, row) for number, row in enumerate(table, start=2)]
    except csv.Error as fault:
        raise UnusableArguments(f"{path}: line {table.line_num}: {fault}") from fault
    if len({row.check for row in rows}) != 1 or len({row.clip for row in rows}) != len(rows):
        raise UnusableArguments(f"{path}: its rows do not belong to one listening check")
    return {row.clip: row for row in rows}


def _row(clip: Clip, check: str, name: str) -> KeyRow:
    place, fate = clip.place, clip.fate
    begin_ns = place.sound.origin_ns + round(clip.begin_s * NS_PER_S)
    return KeyRow(
        check=check,
        clip=name,
        kind=place.kind,
        reason=place.reason,
        call=place.call.id,
        stream=place.one.id,
        capture=place.one.stream.capture,
        speaker="caller" if any(one.id == place.one.id for one in place.call.from_caller) else "callee",
        started=(EPOCH + timedelta(microseconds=begin_ns // 1000)).strftime("%Y-%m-%dT%H:%M:%S.%fZ"),
        from_s=round(clip.begin_s, 2),
        duration_s=round(clip.duration_s, 3),
        encoding=place.one.stream.encoding,
        sampling_rate_hz=clip.rate_hz,
        packets_expected=fate.packets_expected,
        packets_lost=fate.packets_lost,
        packets_discarded=fate.packets_discarded,
        burst_ratio=round(fate.burst_ratio, 3),
        r_factor=round(clip.prediction.r_factor, 2),
        predicted_mos=round(clip.prediction.mos, 3),
        level_before_dbov=round(clip.levelled.before_dbov, 2),
        level_dbov=round(clip.levelled.after_dbov, 2),
        gain_db=round(clip.levelled.gain_db, 2),
        limited_db=round(clip.levelled.limited_db, 2),
    )


def _cell(value: str | int | float) -> str:
    if isinstance(value, str):
        return csv_cell(value)
    return "" if isinstance(value, float) and math.isnan(value) else str(value)


def _read_row(path: Path, number: int, row: Mapping[str, str | None]) -> KeyRow:
    values: dict[str, str | int | float] = {}
    try:
        for one in fields(KeyRow):
            text = row[one.name] or ""
            kind = one.type
            values[one.name] = text if kind is str else int(text) if kind is int else float(text) if text else NAN
    except ValueError as fault:
        raise UnusableArguments(f"{path}: line {number} does not belong into a key") from fault
    return KeyRow(**values)  # type: ignore[arg-type]
