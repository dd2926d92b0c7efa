"""Runs of the nightly room without the command line, for tests."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pyarrow as pa
from pyarrow import parquet

from rtpaudit.nightly.batch import Progress, Run, plan
from rtpaudit.nightly.engine import Outcome
from rtpaudit.nightly.sampling import Sampling
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.sources import list_sources
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.worker import Piece, Result, examine

UTC = ZoneInfo("UTC")
SETTINGS = AuditSettings(zone="UTC", key=b"k" * 32, profile_mark="p")
Work = Callable[[Piece, AuditSettings, Any, Any], Result]


@dataclass
class InThisProcess:
    """An engine that works at once, and loses the pieces that it is told to."""

    work: Work = examine
    settings: AuditSettings = SETTINGS
    lose: Callable[[Piece], int | None] = lambda piece: None
    seen: list[Piece] = field(default_factory=list)
    _done: list[Outcome] = field(default_factory=list)

    @property
    def room(self) -> int:
        return 2 - len(self._done)

    def submit(self, piece: Piece) -> None:
        self.seen.append(piece)
        place = self.lose(piece)
        if place is not None:
            self._done.append(Outcome(piece, None, "ended its worker process (SIGSEGV)", place if place >= 0 else None))
        else:
            self._done.append(Outcome(piece, self.work(piece, self.settings, UTC, None)))

    def gather(self, timeout_s: float) -> list[Outcome]:
        done, self._done = self._done, []
        return done

    def close(self) -> None:
        return


def run(
    folder: Path,
    sources: Sequence[Path | str],
    engine: Any = None,
    settings: AuditSettings = SETTINGS,
    sampling: Sampling | None = None,
) -> Progress:
    """One run over what the sources hold now."""
    store = Store.open(folder, create=True)
    store.begin()
    engine = engine or InThisProcess(settings=settings)
    try:
        tasks = plan(store, list_sources([str(one) for one in sources], 0.0).captures, settings, UTC, sampling)
        return Run(store, engine, settings, UTC, lambda progress: None).go(tasks)
    finally:
        engine.close()
        store.end()


def rows(folder: Path, table: str) -> list[dict[str, Any]]:
    """All rows of a table, as whoever opens the files without rtpaudit sees them."""
    files = sorted(folder.glob(f"night=*/{table}-*.parquet"))
    return (
        pa.concat_tables([parquet.read_table(path, partitioning=None) for path in files]).to_pylist() if files else []
    )


def pending(folder: Path) -> list[Path]:
    """What lies under ``pending``."""
    return sorted((folder / "pending").rglob("*"))
