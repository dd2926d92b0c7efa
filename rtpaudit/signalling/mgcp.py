"""Octets in, MGCP commands and responses out (RFC 3435 sections 3.1 to 3.5)."""

import re
from dataclasses import dataclass

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import printable
from rtpaudit.signalling.sdp import SessionDescription, parse_description

MAX_MESSAGES = 64
MAX_SHOWN = 256

VERBS = frozenset({"EPCF", "CRCX", "MDCX", "DLCX", "RQNT", "NTFY", "AUEP", "AUCX", "RSIP"})
"""3.2.1.1; experimental ones begin with X"""

_COMMAND = re.compile(r"([A-Za-z]{4})[ \t]+([0-9]{1,9})[ \t]+(\S{1,511})[ \t]+MGCP[ \t]+[0-9]", re.IGNORECASE)
_RESPONSE = re.compile(r"([0-9]{3})[ \t]+([0-9]{1,9})(?:[ \t]+(.{0,200}))?(?=[\r\n]|$)")
_FIRST = re.compile(
    rb"\s{0,8}(?:[A-Za-z]{4}[ \t]+[0-9]{1,9}[ \t]+\S{1,511}[ \t]+MGCP[ \t]|[0-9]{3}[ \t]+[0-9]{1,9}(?:[ \t\r\n]|$))",
    re.IGNORECASE,
)
_SEPARATOR = re.compile(r"(?:^|\n)\.[ \t]*(?:\n|$)")


@dataclass(frozen=True, slots=True)
class MgcpMessage:
    """A command or a response."""

    transaction: int
    verb: str = ""
    """of a command"""
    endpoint: str = ""
    status: int = 0
    """of a response"""
    comment: str = ""
    call_id: str = ""
    connection: str = ""
    mode: str = ""
    description: SessionDescription | None = None
    """of a command: where the far side receives; of a response: where the gateway does"""
    fault: str = ""


def looks_like_mgcp(first_octets: bytes) -> bool:
    """Whether octets begin as a command does, or might as a response."""
    return _FIRST.match(first_octets) is not None


def parse_mgcp(octets: bytes) -> list[MgcpMessage]:
    """Messages of one datagram; several are parted by a line with a dot (section 3.5.5).

    Raises
    ------
    MalformedPacket
        Where the first of them has neither a command line nor a response line.
    """
    text = printable(octets.decode("utf-8", "backslashreplace").replace("\r\n", "\n").replace("\r", "\n"))
    found: list[MgcpMessage] = []
    for part in _SEPARATOR.split(text, MAX_MESSAGES)[:MAX_MESSAGES]:
        message = _message(part.lstrip("\n"))
        if message is not None:
            found.append(message)
        elif not found:
            raise MalformedPacket(f"MGCP message that begins {part[:40]!r}")
    return found


def _message(text: str) -> MgcpMessage | None:
    head, _, body = text.partition("\n\n")
    first, *lines = head.split("\n")
    command, response = _COMMAND.match(first), _RESPONSE.match(first)
    if command and (command[1].upper() in VERBS or command[1][0] in "Xx"):
        made = MgcpMessage(int(command[2]), verb=command[1].upper(), endpoint=command[3].lower()[:MAX_SHOWN])
    elif response:
        made = MgcpMessage(int(response[2]), status=int(response[1]), comment=(response[3] or "").strip())
    else:
        return None
    said: dict[str, str] = {}
    for line in lines[:256]:
        name, _, value = line.partition(":")
        said.setdefault(name.strip().upper(), value.strip()[:MAX_SHOWN])
    description, fault = None, ""
    if body.strip():
        try:
            description = parse_description(body.encode("utf-8", "backslashreplace"))
        except MalformedPacket as error:
            fault = str(error)
    return MgcpMessage(
        transaction=made.transaction,
        verb=made.verb,
        endpoint=made.endpoint,
        status=made.status,
        comment=made.comment,
        call_id=said.get("C", ""),
        connection=said.get("I", ""),
        mode=said.get("M", "").lower(),
        description=description,
        fault=fault,
    )
