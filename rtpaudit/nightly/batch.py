"""One run: what is left to do is cut into pieces, worked on, and committed; each capture's failure stays its own."""

import hashlib
import time
from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass, field
from datetime import tzinfo

from rtpaudit import __version__
from rtpaudit.nightly.engine import Engine, Outcome
from rtpaudit.nightly.journal import DRAWN, FAILED, KNOWN, PASSED, Entry
from rtpaudit.nightly.routing import Router
from rtpaudit.nightly.sampling import Sampling, candidate, draw
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.sources import Found
from rtpaudit.nightly.store import Rows, Store
from rtpaudit.nightly.worker import BROKE, LEFT, Examined, Piece, Task, failed

MOST_IN_PIECE, PIECE_OCTETS = 32, 128_000_000
COMMIT_CAPTURES, COMMIT_OCTETS, COMMIT_S = 512, 128_000_000, 60.0
PATIENCE_S = 0.5


@dataclass(slots=True)
class Progress:
    """How far a run has come."""

    captures: int = 0
    """to be audited"""
    octets: int = 0
    captures_done: int = 0
    octets_done: int = 0
    calls: int = 0
    failed: int = 0
    known: int = 0
    """the same content as a capture of before"""
    left: int = 0
    """for the next run"""
    retried: int = 0


Told = Callable[[Progress], None]


@dataclass(slots=True)
class Run:
    """The state of a run."""

    store: Store
    engine: Engine
    settings: AuditSettings
    zone: tzinfo | None
    told: Told
    progress: Progress = field(default_factory=Progress)
    _todo: deque[Task] = field(default_factory=deque)
    _again: deque[Piece] = field(default_factory=deque)
    _rows: Rows = field(default_factory=Rows)
    at: dict[str, Found] = field(default_factory=dict)
    """where the captures of this run lie"""
    _numbers: int = 0
    _at_work: int = 0
    _committed: float = field(default_factory=time.monotonic)

    def go(self, tasks: Sequence[Task]) -> Progress:
        """Audit what there is to audit; what is done when this is interrupted is in the store."""
        self._todo.extend(tasks)
        self.progress.captures = len(tasks)
        self.progress.octets = sum(task.found.size for task in tasks)
        self.told(self.progress)
        try:
            while self._submit() or self._at_work:
                for outcome in self.engine.gather(PATIENCE_S):
                    self._at_work -= 1
                    self._take(outcome)
                self.told(self.progress)
                if self._full():
                    self._commit()
        finally:
            self._commit()
        return self.progress

    def _submit(self) -> bool:
        """Give out as many pieces as the engine has room for; whether anything is left or at work."""
        if self._todo or self._again:
            self.store.refresh()
        while self.engine.room > 0 and (self._again or self._todo):
            piece = self._again.popleft() if self._again else self._next_piece()
            if piece.tasks:
                self._at_work += 1
                self.engine.submit(piece)
        return bool(self._todo or self._again)

    def _next_piece(self) -> Piece:
        """The next captures: fewer towards the end, so that all workers end together."""
        most = min(max(len(self._todo) // (4 * max(self.engine.room, 1)), 1), MOST_IN_PIECE)
        tasks: list[Task] = []
        octets = 0
        while self._todo and len(tasks) < most and (not tasks or octets + self._todo[0].found.size <= PIECE_OCTETS):
            task = self._todo.popleft()
            octets += task.found.size
            # Another run may have been at it meanwhile.
            if self._seen(task.found):
                self._count(task, known=1)
            else:
                tasks.append(task)
        return self._piece(tuple(tasks))

    def _piece(self, tasks: tuple[Task, ...], retry: bool = False) -> Piece:
        self._numbers += 1
        return Piece(self._numbers, tasks, retry)

    def _seen(self, found: Found) -> bool:
        return self.store.known.has_seen(place_of(found, self.settings), found.look, self.settings.profile_mark)

    def _take(self, outcome: Outcome) -> None:
        if outcome.result is None:
            self._lost(outcome)
            return
        entries = []
        for one in outcome.result.examined:
            if one.status == BROKE:
                self._retry(one.task)
            elif one.status == LEFT:
                self._count(one.task, left=1)
            else:
                entries.append(entry_of(one, self.settings))
                self.at[one.capture] = one.task.found
                self._count(one.task, failed=one.status == FAILED, known=one.status == KNOWN)
        self._rows.add(entries, outcome.result.tables)
        if "calls" in outcome.result.tables:
            self.progress.calls += outcome.result.tables["calls"].num_rows

    def _lost(self, outcome: Outcome) -> None:
        """A piece whose worker is gone: who was at work then is tried once more on its own, the others go on."""
        piece = outcome.piece
        if piece.retry:
            task = piece.tasks[0]
            result = failed(task, outcome.reason, self.settings, self.zone)
            self._take(Outcome(piece, result))
        elif outcome.place is not None or len(piece.tasks) == 1:
            culprit = outcome.place or 0
            self._retry(piece.tasks[culprit])
            rest = piece.tasks[:culprit] + piece.tasks[culprit + 1 :]
            if rest:
                self._again.append(self._piece(rest))
        else:
            self._again.extend(self._piece((task,)) for task in piece.tasks)

    def _retry(self, task: Task) -> None:
        self.progress.retried += 1
        self._again.append(self._piece((task,), retry=True))

    def _count(self, task: Task, failed: int = 0, known: int = 0, left: int = 0) -> None:
        self.progress.captures_done += 1
        self.progress.octets_done += task.found.size
        self.progress.failed += failed
        self.progress.known += known
        self.progress.left += left

    def _full(self) -> bool:
        rows = self._rows
        late = time.monotonic() - self._committed > COMMIT_S and bool(rows.entries)
        return late or len(rows.entries) >= COMMIT_CAPTURES or rows.octets >= COMMIT_OCTETS

    def _commit(self) -> None:
        rows, self._rows = self._rows, Rows()
        self._committed = time.monotonic()
        if rows.entries:
            self.store.commit(rows)


def place_of(found: Found, settings: AuditSettings) -> str:
    """What the journal knows a place by; without the key of the pseudonyms it tells nothing."""
    address = found.address.encode("utf-8", "surrogateescape")
    return hashlib.blake2b(address, key=settings.key, digest_size=12).hexdigest()


def entry_of(one: Examined, settings: AuditSettings) -> Entry:
    """What the journal says of a capture."""
    return Entry(
        capture=one.capture,
        profile=settings.profile_mark,
        status=one.status,
        size=one.task.found.size,
        place=place_of(one.task.found, settings),
        look=one.task.found.look,
        version=__version__,
    )


def plan(
    store: Store,
    captures: Sequence[Found],
    settings: AuditSettings,
    zone: tzinfo | None,
    sampling: Sampling | None,
) -> list[Task]:
    """What is left to do: captures that are not in the store, or of these the ones that a sample draws."""
    mark, known = settings.profile_mark, store.known
    fresh = [one for one in captures if not known.has_seen(place_of(one, settings), one.look, mark)]
    strata = dict.fromkeys((one.address for one in fresh), "")
    if sampling is not None:
        strata = _drawn(store, fresh, settings, zone, sampling)
    return [Task(one, known.of_size(one.size, mark), strata[one.address]) for one in fresh if one.address in strata]


def _drawn(
    store: Store, fresh: Sequence[Found], settings: AuditSettings, zone: tzinfo | None, sampling: Sampling
) -> dict[str, str]:
    """Stratum by address of what is drawn, now or by a run before; the draw is in the journal when this returns."""
    router = Router(settings.profile.routes)
    keys = {one.address: (place_of(one, settings), one.look) for one in fresh}
    drawn_before, passed_before = store.known.drawn, store.known.passed
    strata = {one: drawn_before[key] for one, key in keys.items() if key in drawn_before}
    asked = [one for one in fresh if one.address not in strata and keys[one.address] not in passed_before]
    drawn, draws = draw([candidate(one, sampling, router, zone) for one in asked], sampling)
    strata |= {one.found.address: one.stratum for one in drawn}
    entries = [
        Entry(
            capture="",
            profile=settings.profile_mark,
            status=DRAWN if one.address in strata else PASSED,
            size=one.size,
            place=keys[one.address][0],
            look=one.look,
            version=__version__,
            stratum=strata.get(one.address, ""),
        )
        for one in asked
    ]
    if entries:
        store.commit(Rows(entries=entries, draws=[asdict(one) for one in draws]))
    return strata
