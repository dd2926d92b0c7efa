"""The kinds of fault: each spoils a clean plan in its own way, by chance in all that does not make it what it is."""

from collections.abc import Callable
from dataclasses import dataclass

from tests.faultbench.plan import Plan

Spoil = Callable[[Plan], None]


@dataclass(frozen=True)
class Kind:
    """A fault and the findings that name it rightly."""

    name: str
    accepts: frozenset[str]
    spoil: Spoil
    encodings: tuple[str, ...]
    """() for any"""
    suppression: tuple[str, ...]
    """() for any"""


KINDS: dict[str, Kind] = {}


def kind(
    name: str, *, accepts: tuple[str, ...] = (), encodings: tuple[str, ...] = (), suppression: tuple[str, ...] = ()
) -> Callable[[Spoil], Spoil]:
    """Register a fault under its name: that of the finding, or that of the finding and a variant behind a slash."""

    def register(spoil: Spoil) -> Spoil:
        assert name not in KINDS
        KINDS[name] = Kind(name, frozenset(accepts or (name.split("/")[0],)), spoil, encodings, suppression)
        return spoil

    return register
