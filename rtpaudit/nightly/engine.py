"""Engines: pieces go in, results come out, in any order. The one here is processes of this machine.

A worker that dies, or that stays with one capture beyond its time, costs its piece. The engine says at which capture it
was; what to do about it is not the engine's affair.
"""

import os
import signal
import sys
import threading
import time
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import tzinfo
from importlib import import_module
from multiprocessing import get_context
from multiprocessing.connection import Connection, wait
from typing import Any, Protocol

from rtpaudit.errors import RtpAuditError
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.worker import Piece, Result

AHEAD = 2
"""Pieces that a worker has: one at work, one that it begins while the result of the first is taken."""

READY = -1
"""What a worker says first; what it says later are places of captures, results, and sentences where all went wrong."""

START_S = 300.0
"""A process that has not begun by then, compiling included, never will."""

LEAST_TIME_S, TIME_PER_OCTET_S = 600.0, 1e-6
"""A capture may take ten minutes and a second more for each megabyte. Our own."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one piece."""

    piece: Piece
    result: Result | None
    """None where the piece was lost with its worker"""
    reason: str = ""
    place: int | None = None
    """which of its captures was at work when it was lost; None where nobody knows"""


class Engine(Protocol):
    """Who has pieces worked on."""

    @property
    def room(self) -> int:
        """How many more pieces may be submitted now."""

    def submit(self, piece: Piece) -> None:
        """Have a piece worked on."""

    def gather(self, timeout_s: float) -> list[Outcome]:
        """What is done by now, waiting for something as long as ``timeout_s``."""

    def close(self) -> None:
        """End all work."""


Work = Callable[[Piece, AuditSettings, tzinfo | None, Callable[[int], None]], Result]


@dataclass(slots=True)
class _Worker:
    process: Any
    line: Connection
    pieces: deque[Piece] = field(default_factory=deque)
    place: int | None = None
    """capture of the first piece that is at work"""
    since: float = 0.0
    ready: bool = False
    once: bool = False
    """ends with its first piece"""


class LocalProcesses:
    """Processes of this machine, each of which takes one piece after the other."""

    def __init__(
        self, count: int, work: Work, settings: AuditSettings, zone: tzinfo | None, retry_octets: int | None = None
    ) -> None:
        self._count = count
        self._work = (work, settings, zone)
        self._retry_octets = retry_octets
        self._context = get_context("spawn")
        self._workers: list[_Worker] = []
        self._lost: list[Outcome] = []

    @property
    def room(self) -> int:
        """How many more pieces may be submitted now."""
        return AHEAD * self._count - sum(len(one.pieces) for one in self._workers)

    def submit(self, piece: Piece) -> None:
        """Have a piece worked on by whoever has least to do; a retry by a process of its own."""
        idle = [one for one in self._workers if not one.pieces]
        if piece.retry:
            worker = self._start(self._retry_octets)
            worker.once = True
        elif idle or len(self._workers) >= self._count:
            usual = [one for one in self._workers if not one.once]
            worker = min(usual or [self._start(None)], key=lambda one: len(one.pieces))
        else:
            worker = self._start(None)
        if not worker.pieces:
            worker.since = time.monotonic()
        worker.pieces.append(piece)
        try:
            worker.line.send(piece)
        except OSError:
            self._lose(worker, _ended(worker.process))

    def gather(self, timeout_s: float) -> list[Outcome]:
        """What is done by now, waiting for something as long as ``timeout_s``."""
        done, self._lost = self._lost, []
        busy = {one.line: one for one in self._workers}
        if done or not busy:
            timeout_s = 0.0
        for line in wait(list(busy), timeout_s):
            done += self._take(busy[line])  # type: ignore[index]
        for worker in [one for one in self._workers if one.pieces and _overdue(one)]:
            self._lose(worker, "took longer than its time")
        done += self._lost
        self._lost = []
        return done

    def close(self) -> None:
        """End all processes."""
        for worker in self._workers:
            worker.process.kill()
        for worker in self._workers:
            worker.process.join()
            worker.line.close()
        self._workers.clear()

    def _start(self, memory_octets: int | None) -> _Worker:
        ours, theirs = self._context.Pipe()
        process = self._context.Process(
            target=serve, args=(theirs, *self._work, memory_octets, os.getpid()), daemon=True, name="rtpaudit"
        )
        process.start()
        theirs.close()
        worker = _Worker(process, ours)
        self._workers.append(worker)
        return worker

    def _take(self, worker: _Worker) -> list[Outcome]:
        try:
            said = worker.line.recv()
        # Besides the end of the line: what a dying process sent by halves.
        except Exception:
            self._lose(worker, _ended(worker.process))
            return []
        if not worker.ready and said != READY:
            raise RtpAuditError(f"no worker process could begin its work: {said}")
        worker.since, worker.ready = time.monotonic(), True
        if isinstance(said, int):
            worker.place = said if said != READY else None
            return []
        piece = worker.pieces.popleft()
        place, worker.place = worker.place, None
        if worker.once:
            self._dismiss(worker)
        if isinstance(said, str):
            return [Outcome(piece, None, said, place)]
        return [Outcome(piece, said)]

    def _lose(self, worker: _Worker, reason: str) -> None:
        """Take note that a worker is gone: its first piece is lost, others were not begun."""
        self._dismiss(worker)
        if not worker.ready:
            raise RtpAuditError(f"no worker process could begin its work: one {reason}")
        waiting = list(worker.pieces)[1:]
        if worker.pieces:
            self._lost.append(Outcome(worker.pieces[0], None, reason, worker.place))
        for piece in waiting:
            self.submit(piece)

    def _dismiss(self, worker: _Worker) -> None:
        worker.process.kill()
        worker.process.join()
        worker.line.close()
        self._workers.remove(worker)


def _overdue(worker: _Worker) -> bool:
    if not worker.ready:
        return time.monotonic() - worker.since > START_S
    task = worker.pieces[0].tasks[worker.place or 0]
    return time.monotonic() - worker.since > LEAST_TIME_S + TIME_PER_OCTET_S * task.found.size


def _ended(process: Any) -> str:
    """How a process ended, in words."""
    process.join(5.0)
    code = process.exitcode
    if code is not None and code < 0:
        name = signal.Signals(-code).name if -code in signal.valid_signals() else f"signal {-code}"
        return f"ended its worker process ({name})"
    return f"ended its worker process (exit status {code})"


def serve(
    line: Connection,
    work: Work,
    settings: AuditSettings,
    zone: tzinfo | None,
    memory_octets: int | None,
    parent: int,
) -> None:
    """A worker process: pieces come along the line, results go back, until nobody is there any more."""
    # The one at the keyboard speaks to the process that started this one.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    os.umask(0o077)
    threading.Thread(target=_watch, args=(parent,), daemon=True).start()
    try:
        _load()
        limit_memory(memory_octets or settings.memory_octets)
    # Whatever it is, whoever started this process is to hear of it in one sentence.
    except Exception as fault:
        line.send(f"{type(fault).__name__}: {fault}")
        return
    line.send(READY)
    while True:
        try:
            piece = line.recv()
        except (EOFError, OSError):
            return
        try:
            said: Any = work(piece, settings, zone, line.send)
        # What the piece's own handling did not see coming; the captures are tried again one by one.
        except Exception as fault:
            said = f"{type(fault).__name__}: {fault}"
        try:
            line.send(said)
        except OSError:
            return


def _watch(parent: int) -> None:
    """End with the process that started this one, however that ends."""
    while os.getppid() == parent:
        time.sleep(1.0)
    os._exit(1)


def _load() -> None:
    """Load what the work takes, so that it does not count as memory of a capture."""
    # Arrow's own allocators take hold of far more than they use.
    os.environ["ARROW_DEFAULT_MEMORY_POOL"] = "system"
    for name in ("pandas", "pyarrow.parquet", "rtpaudit.report.tables", "rtpaudit.walk"):
        import_module(name)


def limit_memory(octets: int | None) -> None:
    """Let this process take only so much more memory for itself than it has now; what maps a file does not count."""
    if octets is None or sys.platform != "linux":
        return
    import resource

    limit, (_, most) = _taken_octets() + octets, resource.getrlimit(resource.RLIMIT_DATA)
    resource.setrlimit(resource.RLIMIT_DATA, (limit if most == resource.RLIM_INFINITY else min(limit, most), most))


def _taken_octets() -> int:
    """What this process has taken, by the system's own count."""
    return _kilobytes("/proc/self/status", "VmData:") * 1024


def memory_shares(count: int) -> tuple[int | None, int | None]:
    """What each of so many workers may take, and what a retry may: parts of what is there now. [octets]"""
    available = _available_octets()
    if available is None:
        return None, None
    share = int(0.8 * available / (count + 2))
    return share, 2 * share


def _available_octets() -> int | None:
    return _kilobytes("/proc/meminfo", "MemAvailable:") * 1024 or None


def _kilobytes(path: str, name: str) -> int:
    """A line of a file that the system makes up, 0 where there is none."""
    try:
        with open(path, encoding="ascii", errors="replace") as file:
            found = [text.split()[1] for text in file if text.startswith(name)]
    except OSError:
        return 0
    return int(found[0]) if found else 0


def cores() -> int:
    """Cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
