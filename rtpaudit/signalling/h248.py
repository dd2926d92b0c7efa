"""Octets in, the transactions of H.248 in its text coding out (ITU-T H.248.1 Annex B, from memory).

Read are contexts, terminations, streams, modes and the session descriptions of Local and Remote; all else is passed
over.
"""

import re
from dataclasses import dataclass, field

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import printable

MAX_OCTETS = 65_536
MAX_DEPTH = 32
MAX_TRANSACTIONS = 64
MAX_SHOWN = 256

_FIRST = re.compile(
    r"\s{0,8}(?:MEGACO|!)/[0-9]{1,2}\s+(\[[^\]\s]{1,64}\](?::[0-9]{1,5})?|<[^>\s]{1,128}>(?::[0-9]{1,5})?|\S{1,128})\s",
    re.I,
)
_FIRST_OCTETS = re.compile(rb"\s{0,8}(?:MEGACO|!)/[0-9]{1,2}\s", re.IGNORECASE)
_PIECE = re.compile(r'"[^"]*"|\}|([^\s{}=,"]{1,128})\s{0,64}(?:=\s{0,64}([^\s{}=,"]{1,128}))?\s{0,64}(\{)?')
_RAW_END = re.compile(r"(?<!\\)\}")

_LONG_NAMES = {
    "t": "transaction",
    "p": "reply",
    "c": "context",
    "a": "add",
    "mv": "move",
    "mf": "modify",
    "s": "subtract",
    "n": "notify",
    "av": "auditvalue",
    "sc": "servicechange",
    "m": "media",
    "st": "stream",
    "o": "localcontrol",
    "l": "local",
    "r": "remote",
    "mo": "mode",
}
COMMANDS = ("add", "move", "modify", "subtract", "notify", "auditvalue", "servicechange")
_MODES = {
    "so": "sendonly",
    "rc": "recvonly",
    "sr": "sendrecv",
    "in": "inactive",
    "sendonly": "sendonly",
    "receiveonly": "recvonly",
    "sendreceive": "sendrecv",
    "inactive": "inactive",
}


@dataclass(frozen=True, slots=True)
class H248Descriptor:
    """A Local or Remote descriptor of one stream of one termination."""

    context: str
    termination: str
    stream: str
    which: str
    """``local``: where the gateway receives; ``remote``: where the far side does"""
    octets: bytes
    mode: str = ""
    """direction in the words of SDP, "" where none is set"""


@dataclass(slots=True)
class H248Transaction:
    """A transaction request or reply."""

    number: int
    reply: bool
    context: str = ""
    """the first that is named"""
    commands: list[str] = field(default_factory=list)
    descriptors: list[H248Descriptor] = field(default_factory=list)
    subtracted: list[str] = field(default_factory=list)

    @property
    def summary(self) -> str:
        """Kind and commands in one line."""
        kind = "Reply" if self.reply else "Transaction"
        return f"{kind} {' '.join(self.commands)}".rstrip()[:MAX_SHOWN]


@dataclass(slots=True)
class H248Message:
    """One message."""

    sender: str
    transactions: list[H248Transaction] = field(default_factory=list)


def looks_like_h248(first_octets: bytes) -> bool:
    """Whether octets begin as a message in text coding does."""
    return _FIRST_OCTETS.match(first_octets) is not None


def parse_h248(octets: bytes) -> H248Message:
    """A message out of one datagram.

    Raises
    ------
    MalformedPacket
        Where there is no header.
    """
    text = octets[:MAX_OCTETS].decode("utf-8", "backslashreplace").replace("\r\n", "\n").replace("\r", "\n")
    text = printable(text)
    first = _FIRST.match(text)
    if first is None:
        raise MalformedPacket(f"H.248 message that begins {text[:40]!r}")
    walk = _Walk(text, H248Message(first[1]))
    walk.run(first.end())
    return walk.message


@dataclass(slots=True)
class _Walk:
    """One pass over the nested descriptors."""

    text: str
    message: H248Message
    stack: list[tuple[str, str]] = field(default_factory=list)
    modes: dict[tuple[str, str], str] = field(default_factory=dict)

    def run(self, begin: int) -> None:
        place = begin
        while (piece := _PIECE.search(self.text, place)) is not None:
            place = piece.end()
            if piece[0] == "}":
                if self.stack:
                    self.stack.pop()
                continue
            if piece[1] is None:
                continue
            folded = piece[1].lower()
            name, value = _LONG_NAMES.get(folded, folded), piece[2] or ""
            self._meet(name, value)
            if not piece[3]:
                continue
            if name in ("local", "remote") and self._inside("media"):
                end = _RAW_END.search(self.text, place)
                stop = end.start() if end else len(self.text)
                self._describe(name, self.text[place:stop])
                place = end.end() if end else stop
            elif len(self.stack) < MAX_DEPTH:
                self.stack.append((name, value))
            else:
                return

    def _meet(self, name: str, value: str) -> None:
        found = self.message.transactions
        if name in ("transaction", "reply") and value.isdecimal() and value.isascii() and len(value) <= 10:
            if len(found) < MAX_TRANSACTIONS:
                found.append(H248Transaction(int(value), name == "reply"))
            return
        if not found:
            return
        current = found[-1]
        if name == "context":
            current.context = current.context or value
        elif name in COMMANDS and self._inside("context") and len(current.commands) < 64:
            current.commands.append(f"{name.capitalize()} {value}".rstrip())
            if name == "subtract" and current.reply:
                current.subtracted.append(value)
        elif name == "mode" and self._inside("localcontrol"):
            self.modes[self._termination(), self._value("stream")] = _MODES.get(value.lower(), "")

    def _describe(self, which: str, raw: str) -> None:
        if not self.message.transactions or not raw.strip():
            return
        termination, stream = self._termination(), self._value("stream")
        self.message.transactions[-1].descriptors.append(
            H248Descriptor(
                context=self._value("context"),
                termination=termination,
                stream=stream,
                which=which,
                octets=raw.replace("\\}", "}").strip().encode("utf-8", "backslashreplace"),
                mode=self.modes.get((termination, stream), ""),
            )
        )

    def _inside(self, name: str) -> bool:
        return any(one == name for one, _ in self.stack)

    def _value(self, name: str) -> str:
        return next((value for one, value in reversed(self.stack) if one == name), "")

    def _termination(self) -> str:
        return next((value for one, value in reversed(self.stack) if one in COMMANDS), "")
