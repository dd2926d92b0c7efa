"""Party names on their way to the store: kept, replaced by keyed pseudonyms, or gone with the addresses."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from ipaddress import ip_address
from typing import TYPE_CHECKING

from rtpaudit.nightly.settings import NAMES_KEPT, PRIVATE
from rtpaudit.report.privacy import TREATMENT, Pseudonyms

if TYPE_CHECKING:
    from pandas import DataFrame, Series

# A shorter name within a sentence is rather a figure.
_SHORTEST_NAME = 3
_WHOLE = ("caller", "callee", "call_id")
_SENTENCES = ("capture", "says", "check_next", "message", "what", "lost", "reason", "set_aside")


def hide_names(tables: Mapping[str, DataFrame], names: str, key: bytes, digits: bool) -> dict[str, DataFrame]:
    """The tables of some captures as the store keeps them; each has a column ``capture_id``.

    Where names are kept, only the pressed digits may be masked. Where they are keyed, parties and Call-IDs become
    pseudonyms everywhere, in names of captures too, and addresses stay. Where they are private, addresses go as well.
    """
    hidden = {name: frame.copy(deep=False) for name, frame in tables.items()}
    if names == PRIVATE:
        hidden = hidden | Pseudonyms(key, []).tables({name: hidden[name] for name in TREATMENT})
        for frame in hidden.values():
            if "capture" in frame:
                hide_captures(frame)
    elif names != NAMES_KEPT:
        _key(hidden, Pseudonyms(key, []))
    if not digits:
        events = hidden["events"]
        events["digit"] = events["digit"].mask(events["digit"].notna(), "x")
    return hidden


def hide_captures(frame: DataFrame) -> None:
    """Names of captures by their content, as they are often made of who spoke."""
    frame["capture"] = ("capture-" + frame["capture_id"].str[:8]).astype("string")


def hide_in_report(
    tables: Mapping[str, DataFrame], captures: Sequence[str], names: str, key: bytes
) -> tuple[dict[str, DataFrame], list[str]]:
    """Tables and captures' names of one report, with the same pseudonyms as the store has."""
    if names == NAMES_KEPT:
        return dict(tables), list(captures)
    pseudonyms = Pseudonyms(key, captures)
    if names == PRIVATE:
        return pseudonyms.tables(tables), [pseudonyms.file(name) for name in captures]
    hidden = {name: frame.copy(deep=False) for name, frame in tables.items()}
    told = _key(hidden, pseudonyms)
    return hidden, [told(name) for name in captures]


def _key(tables: dict[str, DataFrame], pseudonyms: Pseudonyms) -> Callable[[str], str]:
    """Put pseudonyms in place of parties and Call-IDs; what does the same for a sentence."""
    parties = _cells(tables, "calls", "caller") | _cells(tables, "calls", "callee")
    stand_in = {name: pseudonyms.party(name) for name in parties if not _is_address(name)}
    dialogs = _cells(tables, "calls", "call_id") | _cells(tables, "signalling", "call_id")
    stand_in |= {name: pseudonyms.dialog(name) for name in dialogs}
    known = _any_of(stand_in)

    def told(text: str) -> str:
        return known.sub(lambda found: stand_in[found[0]], text) if known else text

    for frame in tables.values():
        for column in [name for name in frame.columns if name in _WHOLE]:
            frame[column] = _mapped(frame[column], lambda text: stand_in.get(text, text))
        for column in [name for name in frame.columns if name in _SENTENCES]:
            frame[column] = _mapped(frame[column], told)
    line = tables["signalling"]["line"]
    tables["signalling"]["line"] = line.mask(line.notna())
    return told


def _cells(tables: Mapping[str, DataFrame], table: str, column: str) -> set[str]:
    return set(tables[table][column].dropna().unique())


def _is_address(name: str) -> bool:
    try:
        ip_address(name)
    except ValueError:
        return False
    return True


def _any_of(names: Iterable[str]) -> re.Pattern[str] | None:
    """Any of several names standing alone, the longest first."""
    wanted = sorted((name for name in names if len(name) >= _SHORTEST_NAME), key=len, reverse=True)
    return re.compile("|".join(rf"(?<![^\W_]){re.escape(name)}(?![^\W_])" for name in wanted)) if wanted else None


def _mapped(series: Series, change: Callable[[str], str]) -> Series:
    """The column with each distinct text changed once."""
    return series.map({text: change(text) for text in series.dropna().unique()}).astype("string")
