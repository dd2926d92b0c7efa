"""What a capture is known by: its content, never its name."""

import hashlib
import os
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

from rtpaudit.nightly.sources import Found, file_system
from rtpaudit.profile import Profile

if TYPE_CHECKING:
    from rtpaudit.signalling.payload_types import Encoding

END = 1 << 16
"""Octets at either end that a glance takes in."""

_LENGTH = 16


def content_of(path: str | Path) -> str:
    """Digest of all octets of a file (BLAKE2b of 128 bits), which two captures share only if they are the same."""
    with open(path, "rb") as file:
        return hashlib.file_digest(file, lambda: hashlib.blake2b(digest_size=_LENGTH)).hexdigest()


def unread(found: Found) -> str:
    """What stands for a capture that cannot be read: its place and its look."""
    return "unread-" + hashlib.blake2b(f"{found.address} {found.look}".encode(), digest_size=12).hexdigest()


def glance(found: Found) -> bytes:
    """The first octets and the last of a file, without what lies between."""
    if found.remote:
        system, _ = file_system(found.source)
        if found.size <= 2 * END:
            return bytes(system.cat_file(found.path))
        return bytes(system.cat_file(found.path, 0, END)) + bytes(system.cat_file(found.path, found.size - END))
    with open(found.address, "rb") as file:
        octets = file.read(END)
        if found.size > 2 * END:
            file.seek(-END, os.SEEK_END)
        return octets + file.read(END)


def lot_of(octets: bytes, size: int, seed: int) -> int:
    """The lot that a capture draws, of 64 bits: by its size and both its ends, so that it goes with the content.

    With one ``seed`` a capture draws the same lot on every run, under any name, whichever others lie beside it.
    """
    digest = hashlib.blake2b(octets, digest_size=8, key=seed.to_bytes(8, "big", signed=True))
    digest.update(size.to_bytes(8, "big"))
    return int.from_bytes(digest.digest(), "big")


def profile_mark(profile: Profile, given: "Mapping[int, Encoding]", delay_ms: float | None, sound: bool) -> str:
    """Eight letters for all settings that change figures; routes and clips change none."""
    values = asdict(profile)
    for without in ("routes", "listening"):
        del values[without]
    told = repr((_sorted(values), sorted((number, str(one)) for number, one in given.items()), delay_ms, sound))
    return hashlib.blake2b(told.encode(), digest_size=4).hexdigest()


def _sorted(value: object) -> object:
    """Mappings in order of their keys, so that how a profile was written does not count."""
    return sorted((key, _sorted(each)) for key, each in value.items()) if isinstance(value, Mapping) else value
