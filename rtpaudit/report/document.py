"""audit.json: everything of the folder in one document, with a schema version."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from rtpaudit import __version__
from rtpaudit.profile import Profile
from rtpaudit.report.rows import json_lines

if TYPE_CHECKING:
    from pandas import DataFrame

SCHEMA = "rtpaudit audit"
SCHEMA_VERSION = 1
"""One more whenever a reader of the older document would misread the newer; new columns and keys are no such thing."""

OPENING = f'{{\n"schema": "{SCHEMA}",\n"schema_version": '.encode()
"""How every such document begins, and so how a folder that rtpaudit wrote is known."""


def document(
    tables: Mapping[str, DataFrame],
    captures: Sequence[str],
    profile: Mapping[str, Any],
    cautions: Sequence[str],
) -> Iterator[Any]:
    """The document buffer after buffer: versions, captures, profile and cautions, then each table as a list of rows."""
    yield OPENING + f"{SCHEMA_VERSION},\n".encode()
    for key, value in {
        "rtpaudit": __version__,
        "captures": list(captures),
        "profile": profile,
        "cautions": list(cautions),
    }.items():
        yield f"{json.dumps(key)}: {json.dumps(value, allow_nan=False)},\n".encode()
    for place, (name, frame) in enumerate(tables.items()):
        yield f"{json.dumps(name)}: [\n".encode()
        yield from json_lines(name, frame)
        yield b"],\n" if place + 1 < len(tables) else b"]\n"
    yield b"}\n"


def profile_of(profile: Profile, private: bool) -> dict[str, Any]:
    """The profile as plain values; without the routes, which name parties, where those stay private."""
    values = asdict(profile)
    if private:
        del values["routes"]
    return values
