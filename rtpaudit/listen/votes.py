"""Votes as listeners handed them in: files of the rating sheet, also after a spreadsheet saved them again."""

import csv
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rtpaudit.errors import UnusableArguments
from rtpaudit.listen.sheet import SCALE

NEEDED = ("check", "listener", "clip", "vote")
MOST_OCTETS, MOST_ROWS = 4 << 20, 20_000
LONGEST_TEXT = 500

Matrix = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Vote:
    """One row of a sheet."""

    check: str
    listener: str
    session: str
    """tells two listeners of one name apart"""
    clip: str
    vote: int | None
    """None where the listener gave none"""
    comment: str
    rated_at: str


@dataclass(frozen=True, slots=True)
class Votes:
    """All votes of one listening check."""

    check: str
    listeners: list[str]
    clips: list[str]
    matrix: Matrix
    """shape (listeners, clips), NaN where there is no vote"""
    comments: list[tuple[str, str, str]]
    """listener, clip and what was said"""
    replaced: int
    """votes that a later one of the same sheet took the place of"""

    def without_names(self) -> "Votes":
        """The same without who voted and what was said."""
        return replace(self, listeners=[f"listener {k}" for k in range(1, len(self.listeners) + 1)], comments=[])


def read_votes(paths: Sequence[Path]) -> list[Vote]:
    """Every row of the files that the listeners saved. UnusableArguments names file and line of what is none."""
    return [vote for path in paths for vote in _read(path)]


def together(votes: Iterable[Vote], clips: Sequence[str]) -> Votes:
    """Votes as a matrix with a column for each clip of the key; of one sheet saved twice the later vote holds.

    Raises
    ------
    UnusableArguments
        If they are of more than one check, or of clips that the key does not have.
    """
    rows = list(votes)
    checks = dict.fromkeys(row.check for row in rows)
    if len(checks) > 1:
        raise UnusableArguments(f"the ratings are of different listening checks: {', '.join(checks)}")
    last: dict[tuple[str, str, str], Vote] = {}
    replaced = 0
    for row in sorted(rows, key=lambda one: one.rated_at):
        if row.clip not in clips:
            raise UnusableArguments(f"{row.clip!r} is rated, which the key does not have: is it the key of this check?")
        place = (row.listener, row.session, row.clip)
        earlier = last.get(place)
        if earlier is None or row.vote is not None:
            replaced += earlier is not None and earlier.vote not in (None, row.vote)
            last[place] = row
    people = list(dict.fromkeys((row.listener, row.session) for row in rows))
    shown = _shown(people)
    matrix = np.full((len(people), len(clips)), np.nan)
    for (listener, session, clip), row in last.items():
        if row.vote is not None:
            matrix[people.index((listener, session)), list(clips).index(clip)] = row.vote
    comments = [(shown[people.index(key[:2])], key[2], row.comment) for key, row in last.items() if row.comment]
    return Votes(next(iter(checks), ""), shown, list(clips), matrix, sorted(comments, key=lambda one: one[1]), replaced)


def _shown(people: Sequence[tuple[str, str]]) -> list[str]:
    """Names, with the session where two have the same."""
    names = [name for name, _ in people]
    return [f"{name} ({session})" if names.count(name) > 1 else name for name, session in people]


def _read(path: Path) -> list[Vote]:
    try:
        with open(path, "rb") as file:
            text = file.read(MOST_OCTETS + 1).decode("utf-8-sig")
    except OSError as fault:
        raise UnusableArguments(f"{path}: cannot be read: {fault.strerror}") from fault
    except UnicodeDecodeError as fault:
        raise UnusableArguments(f"{path}: is no file of ratings: octet {fault.start} is no text in UTF-8") from fault
    head = text.split("\n", 1)[0]
    table = csv.DictReader(text.splitlines(), delimiter=max(",;\t", key=head.count))
    try:
        lacking = [name for name in NEEDED if name not in (table.fieldnames or ())]
        if len(text) > MOST_OCTETS or lacking:
            raise UnusableArguments(
                f"{path}: is no file of ratings: its first line lacks {', '.join(lacking) or 'an end'}"
            )
        rows = [_vote(path, table.line_num, row) for row in table]
    except csv.Error as fault:
        raise UnusableArguments(f"{path}: line {table.line_num}: {fault}") from fault
    if len(rows) > MOST_ROWS:
        raise UnusableArguments(f"{path}: has {len(rows)} ratings, more than any listening check")
    return rows


def _vote(path: Path, line: int, row: Mapping[str | None, str | None]) -> Vote:
    cells = {name: (text or "").strip()[:LONGEST_TEXT] for name, text in row.items() if isinstance(name, str)}
    text = cells["vote"]
    if text and text not in map(str, SCALE):
        raise UnusableArguments(f"{path}: line {line}: {text[:20]!r} is no vote, which is {min(SCALE)} to {max(SCALE)}")
    if not cells["listener"]:
        raise UnusableArguments(f"{path}: line {line}: nobody is named as the listener")
    return Vote(
        check=cells["check"],
        listener=cells["listener"],
        session=cells.get("session", ""),
        clip=cells["clip"],
        vote=int(text) if text else None,
        comment=cells.get("comment", ""),
        rated_at=cells.get("rated_at", ""),
    )
