"""The error tree: one child per thing that a caller can do about it.

RtpAuditError
├── UnreadableCapture     another file, or a repaired one, is needed
├── MalformedPacket       one packet or message is refused; the audit records it as damage and goes on
├── MissingCodec          an extra has to be installed, or the audio is left out
├── UnusableProfile       the profile needs an edit
├── UnusableArguments     the command line, or the arguments of a call, need an edit
├── UnusableOutput        the output folder cannot be written or is not ours to replace
└── UnusableHistory       the store was written by another version, or is not a store
"""


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


class UnusableOutput(RtpAuditError):
    """An output folder that cannot be written, or that rtpaudit did not write."""


class UnusableHistory(RtpAuditError):
    """A store of nights that this version cannot read."""
