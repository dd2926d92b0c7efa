"""One piece of captures, audited wherever a worker runs: one capture's failure stays its own."""

import os
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import tzinfo
from pathlib import Path
from typing import TYPE_CHECKING

from rtpaudit import __version__
from rtpaudit.capture.damage import printable
from rtpaudit.errors import RtpAuditError, UnreadableCapture
from rtpaudit.nightly.identity import content_of, unread
from rtpaudit.nightly.journal import DONE, FAILED, KNOWN
from rtpaudit.nightly.rows import Facts, PieceRows
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.sources import Found, file_system, look_again

if TYPE_CHECKING:
    import pyarrow as pa

LEFT, BROKE = "left", "broke"
"""Left for the next run, as it changed meanwhile; broke in a way that another process may be spared."""


@dataclass(frozen=True, slots=True)
class Task:
    """One capture to audit."""

    found: Found
    known: tuple[str, ...] = ()
    """captures of the same size that were audited before"""
    stratum: str = ""


@dataclass(frozen=True, slots=True)
class Piece:
    """What a worker is given at one time."""

    number: int
    tasks: tuple[Task, ...]
    retry: bool = False
    """a capture that broke a worker before, alone"""


@dataclass(frozen=True, slots=True)
class Examined:
    """What became of one capture."""

    task: Task
    status: str
    """``done``, ``failed``, ``known``, ``left`` or ``broke``"""
    capture: str = ""
    reason: str = ""


@dataclass(slots=True)
class Result:
    """What a worker hands back."""

    examined: list[Examined] = field(default_factory=list)
    tables: "dict[str, pa.Table]" = field(default_factory=dict)


Beginning = Callable[[int], None]
"""Told the place of each task in its piece before it is begun."""


def examine(piece: Piece, settings: AuditSettings, zone: tzinfo | None, beginning: Beginning | None = None) -> Result:
    """Audit the captures of a piece."""
    rows, result = PieceRows(settings, zone), Result()
    for place, task in enumerate(piece.tasks):
        if beginning:
            beginning(place)
        result.examined.append(_examine(task, rows, settings, last=piece.retry))
    if rows.facts:
        result.tables = rows.finish()
    return result


def failed(task: Task, reason: str, settings: AuditSettings, zone: tzinfo | None) -> Result:
    """Result for a capture that no worker came through with."""
    rows = PieceRows(settings, zone)
    try:
        with at_hand(task.found) as path:
            capture = content_of(path)
    except (OSError, RtpAuditError):
        capture = unread(task.found)
    rows.add(_facts(task, capture, FAILED, reason, time.monotonic()), None)
    return Result([Examined(task, FAILED, capture, reason)], rows.finish())


def _examine(task: Task, rows: PieceRows, settings: AuditSettings, last: bool) -> Examined:
    from rtpaudit.walk import audit

    begun, capture, path = time.monotonic(), unread(task.found), ""
    try:
        with at_hand(task.found) as path:
            capture = content_of(path)
            if capture in task.known or rows.holds(capture):
                return Examined(task, KNOWN, capture)
            found = audit(
                path,
                profile=settings.profile,
                payload_types=settings.payload_types,
                delay_ms=settings.delay_ms,
                digits=settings.digits,
                sound=settings.sound,
            )
            if look_again(task.found) != task.found:
                return Examined(task, LEFT, capture)
            rows.add(_facts(task, capture, DONE, "", begun), found)
            return Examined(task, DONE, capture)
    except (RtpAuditError, OSError) as fault:
        reason = _told(fault, path or task.found.address)
    except MemoryError:
        reason = "needs more memory than a worker may take"
        if not last:
            return Examined(task, BROKE, capture, reason)
    # Around one capture nothing gets through: the others are not to suffer from it.
    except Exception as fault:
        reason = f"a fault of rtpaudit itself: {type(fault).__name__}: {fault}"
        if not last:
            return Examined(task, BROKE, capture, reason)
    if look_again(task.found) != task.found:
        return Examined(task, LEFT, capture)
    rows.add(_facts(task, capture, FAILED, reason, begun), None)
    return Examined(task, FAILED, capture, reason)


@contextmanager
def at_hand(found: Found) -> Iterator[str]:
    """Path of a capture on this machine, fetched for the time being where it lies elsewhere."""
    if not found.remote:
        yield found.address
        return
    system, _ = file_system(found.source)
    with tempfile.TemporaryDirectory(prefix="rtpaudit-") as folder:
        path = os.path.join(folder, Path(found.name).name or "capture")
        try:
            system.get_file(found.path, path)
        # Each file system has errors of its own; there is no list of them.
        except Exception as fault:
            raise UnreadableCapture(f"cannot be fetched ({type(fault).__name__}: {fault})") from fault
        yield path


def _told(fault: Exception, path: str) -> str:
    """The reason without the place, which the store does not keep."""
    if isinstance(fault, OSError) and fault.strerror:
        return f"cannot be read: {fault.strerror}"
    return str(fault).removeprefix(f"{printable(path)}: ")


def _facts(task: Task, capture: str, status: str, reason: str, begun: float) -> Facts:
    now = time.time_ns()
    return Facts(
        capture_id=capture,
        capture=task.found.name,
        status=status,
        reason=reason,
        stratum=task.stratum,
        octets=task.found.size,
        fallback_ns=task.found.changed_ns or now,
        audit_s=time.monotonic() - begun,
        audited_ns=now,
        rtpaudit=__version__,
    )
