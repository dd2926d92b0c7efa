"""The outcome of a listening check: votes joined with the key, as figures, tables, text and a page."""

import json
import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import suppress
from dataclasses import asdict, dataclass
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np

from rtpaudit import __version__
from rtpaudit.errors import UnusableArguments
from rtpaudit.listen.accuracy import Accuracy, accuracy
from rtpaudit.listen.key import KEY, KeyRow, read_key
from rtpaudit.listen.opinion import Opinions, correlation_with_others, krippendorff_alpha, opinions
from rtpaudit.listen.page import outcome_page
from rtpaudit.listen.votes import Votes, read_votes, together
from rtpaudit.listen.words import outcome_text
from rtpaudit.report.folder import Mark, new_folder
from rtpaudit.report.rows import csv_cell

SCHEMA, SCHEMA_VERSION = "rtpaudit listening outcome", 1
MOST_KEYS = 100
"""that are looked at where none is given"""
MARK = Mark("outcome.json", f'{{\n "schema": "{SCHEMA}",\n "schema_version": '.encode())


@dataclass(frozen=True, slots=True)
class Outcome:
    """All that the votes of one check tell."""

    rows: list[KeyRow]
    """of the clips, in the order of the columns of the votes"""
    votes: Votes
    opinions: Opinions
    alpha: float
    with_others: Any
    """correlation of each listener with the mean of the others. Shape (listeners,)"""
    accuracy: Accuracy

    def clips(self) -> list[dict[str, Any]]:
        """One row per clip: what it is, what listeners said, what was predicted; worst opinion first."""
        mapping = self.accuracy.mapping
        rows = []
        for k, row in enumerate(self.rows):
            mapped = mapping(np.array([row.predicted_mos]))[0] if mapping else math.nan
            mean = float(self.opinions.mean[k])
            rows.append(
                {
                    "clip": row.clip,
                    "kind": row.kind,
                    "reason": row.reason,
                    "call": row.call,
                    "stream": row.stream,
                    "capture": row.capture,
                    "started": row.started,
                    "encoding": row.encoding,
                    "packets_expected": row.packets_expected,
                    "packets_lost": row.packets_lost,
                    "packets_discarded": row.packets_discarded,
                    "votes": int(self.opinions.votes[k]),
                    "mean_opinion": _short(mean),
                    "deviation": _short(self.opinions.deviation[k]),
                    "interval_low": _short(self.opinions.low[k]),
                    "interval_high": _short(self.opinions.high[k]),
                    "predicted_mos": _short(row.predicted_mos),
                    "mapped_mos": _short(mapped),
                    "error": _short(row.predicted_mos - mean),
                }
            )
        return sorted(rows, key=lambda one: math.inf if one["mean_opinion"] is None else one["mean_opinion"])

    def listeners(self) -> list[dict[str, Any]]:
        """One row per listener."""
        matrix = self.votes.matrix
        return [
            {
                "listener": name,
                "votes": int((~np.isnan(matrix[k])).sum()),
                "mean_vote": _short(float(np.nanmean(matrix[k])) if not np.isnan(matrix[k]).all() else math.nan),
                "correlation_with_others": _short(self.with_others[k]),
            }
            for k, name in enumerate(self.votes.listeners)
        ]

    def single_votes(self) -> list[dict[str, Any]]:
        """One row per vote."""
        said = {(listener, clip): comment for listener, clip, comment in self.votes.comments}
        return [
            {
                "listener": listener,
                "clip": clip,
                "vote": None if np.isnan(self.votes.matrix[k, j]) else int(self.votes.matrix[k, j]),
                "comment": said.get((listener, clip), ""),
            }
            for k, listener in enumerate(self.votes.listeners)
            for j, clip in enumerate(self.votes.clips)
        ]

    def figures(self) -> dict[str, Any]:
        """What holds for the check as a whole."""
        plain = asdict(self.accuracy)
        mapping = plain.pop("mapping")
        return {
            "check": self.votes.check,
            "listeners": len(self.votes.listeners),
            "clips": len(self.rows),
            "votes": int(self.opinions.votes.sum()),
            "votes_replaced": self.votes.replaced,
            "krippendorff_alpha_ordinal": _short(self.alpha),
            "compared_clips": plain.pop("clips"),
            **{name: _short(value) for name, value in plain.items()},
            "mapping": mapping and {name: _short(value) for name, value in mapping.items()},
        }


def find_key(ratings: Sequence[Path], given: Path | None, check: str) -> dict[str, KeyRow]:
    """The key of a check: the one given, or that which lies near the ratings. UnusableArguments."""
    if given is not None:
        key = read_key(given)
        if next(iter(key.values())).check != check:
            raise UnusableArguments(f"{given}: is the key of another listening check than the ratings are")
        return key
    for path in _likely(ratings):
        with suppress(UnusableArguments):
            key = read_key(path)
            if next(iter(key.values())).check == check:
                return key
    raise UnusableArguments(f"no {KEY} of listening check {check!r} lies near the ratings; say --key FILE")


def _likely(ratings: Sequence[Path]) -> Iterator[Path]:
    """Where a key may be: beside the ratings or here, up to two folders above, or one folder below."""
    beside = list(dict.fromkeys([*(path.absolute().parent for path in ratings), Path.cwd()]))
    above = [place for path in beside for place in list(path.parents)[:2]]
    yield from (place / KEY for place in dict.fromkeys([*beside, *above]) if (place / KEY).is_file())
    for place in beside:
        yield from islice(sorted(place.glob(f"*/{KEY}")), MOST_KEYS)


def work_out(ratings: Sequence[Path], key: Path | None = None, private: bool = False) -> Outcome:
    """Join the votes with the key; ``private`` leaves out the listeners' names and comments.

    Raises
    ------
    UnusableArguments
        If files are no ratings, or do not fit each other or the key.
    """
    votes = read_votes(ratings)
    checks = list(dict.fromkeys(vote.check for vote in votes))
    if not votes:
        raise UnusableArguments(f"{ratings[0]}: holds no rating")
    if len(checks) > 1:
        raise UnusableArguments(f"the ratings are of different listening checks: {', '.join(checks)}")
    rows = find_key(ratings, key, checks[0])
    joined = together(votes, list(rows))
    if private:
        joined = joined.without_names()
    found = opinions(joined.matrix)
    predicted = np.array([row.predicted_mos for row in rows.values()])
    return Outcome(
        list(rows.values()),
        joined,
        found,
        krippendorff_alpha(joined.matrix),
        correlation_with_others(joined.matrix),
        accuracy(predicted, found.mean, found.half_width),
    )


def write_outcome(outcome: Outcome, folder: Path) -> None:
    """Write tables, text and page in place of those that stand there. UnusableOutput where the place is not ours."""
    tables = {"opinions": outcome.clips(), "listeners": outcome.listeners(), "votes": outcome.single_votes()}
    figures = outcome.figures()
    with new_folder(folder, MARK) as partial:
        for name, rows in tables.items():
            (partial / f"{name}.csv").write_text("".join(_csv(rows)), "utf-8")
        (partial / "outcome.txt").write_text(outcome_text(figures, tables["opinions"]) + "\n", "utf-8")
        (partial / "index.html").write_text(outcome_page(figures, tables, outcome.accuracy.mapping), "utf-8")
        head = {"schema": SCHEMA, "schema_version": SCHEMA_VERSION, "rtpaudit": __version__, **figures, **tables}
        (partial / MARK.file).write_text(json.dumps(head, indent=1, allow_nan=False) + "\n", "utf-8")


def _csv(rows: Sequence[Mapping[str, Any]]) -> Iterable[str]:
    yield ",".join(rows[0] if rows else ()) + "\n"
    for row in rows:
        yield (
            ",".join(
                "" if cell is None else csv_cell(str(cell)) if isinstance(cell, str) else str(cell)
                for cell in row.values()
            )
            + "\n"
        )


def _short(value: float) -> float | None:
    """A figure for people, None where there is none."""
    return None if math.isnan(value) else round(float(value), 3)
