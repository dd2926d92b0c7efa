"""The error tree: one child per thing that a caller can do about it.

RtpAuditError
├── UnreadableCapture     another file, or a repaired one, is needed
├── MalformedPacket       one packet or message is refused; the audit records it as damage and goes on
├── MissingCodec          an extra has to be installed, or the audio is left out
├── UnusableProfile       the profile needs an edit
├── UnusableArguments     the command line, or the arguments of a call, need an edit
│   └── NothingChosen     no call is what was looked for; it names those that come nearest
├── UnusableOutput        the output folder cannot be written or is not ours to replace
└── UnusableHistory       the store was written by another version, or is not a store
"""

from collections.abc import Sequence
from dataclasses import dataclass


class RtpAuditError(Exception):
    """The root: its text is one sentence that says what, where and what to do."""


class UnreadableCapture(RtpAuditError):
    """A capture of which nothing at all can be read."""


class MalformedPacket(RtpAuditError):
    """Octets that do not hold what their header promises."""


class MissingCodec(RtpAuditError):
    """An encoding whose decoder is not built in or not installed."""


class UnusableProfile(RtpAuditError):
    """A profile with an unknown key or a value outside its permitted range."""


class UnusableArguments(RtpAuditError):
    """Arguments that contradict each other or name nothing."""


@dataclass(frozen=True, slots=True)
class NearCall:
    """A call that comes near to what was looked for."""

    id: str
    caller: str
    callee: str
    started_ns: int
    ended_ns: int


class NothingChosen(UnusableArguments):
    """A selection that fits no call, or names one that is not there."""

    def __init__(self, missing: Sequence[str], nearest: Sequence[NearCall]) -> None:
        self.missing = list(missing)
        """ids that are not there; empty where what was said fits no call"""
        self.nearest = list(nearest)
        """the nearest first; empty where there are no calls at all"""
        what = f"there is no call {', '.join(map(repr, missing))}" if missing else "no call is what was looked for"
        named = ", ".join(f"{one.id} ({one.caller} to {one.callee})" for one in self.nearest)
        super().__init__(f"{what}; nearest: {named}" if named else f"{what}: the capture has no call")


class UnusableOutput(RtpAuditError):
    """An output folder that cannot be written, or that rtpaudit did not write."""


class UnusableHistory(RtpAuditError):
    """A store of nights that this version cannot read."""
