"""Finds which call in a packet capture sounded bad, which way, how bad and why."""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rtpaudit.media.selection import Selection
    from rtpaudit.profile import Profile
    from rtpaudit.walk import Audit, audit

__all__ = ["Audit", "Profile", "Selection", "audit"]
__version__ = "0.1.0"

# Fetched on first use, so that `import rtpaudit` and `rtpaudit --help` stay quick.
_HOMES = {
    "Audit": "rtpaudit.walk",
    "audit": "rtpaudit.walk",
    "Profile": "rtpaudit.profile",
    "Selection": "rtpaudit.media.selection",
}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        from importlib import import_module

        found = getattr(import_module(_HOMES[name]), name)
        globals()[name] = found
        return found
    raise AttributeError(f"module 'rtpaudit' has no attribute {name!r}")
