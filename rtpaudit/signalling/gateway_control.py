"""Media that a call agent sets up in gateways: the session descriptions within MGCP and H.248 become media terms.

There is no caller and no callee here: a gateway is told to connect an endpoint (MGCP) or a termination (H.248) to an
address, and says where it receives itself.
"""

from dataclasses import dataclass, field, replace

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.calls import MediaTerm, SignallingMessage, media_term
from rtpaudit.signalling.h248 import H248Message, H248Transaction
from rtpaudit.signalling.mgcp import MgcpMessage
from rtpaudit.signalling.sdp import DIRECTIONS, SessionDescription, parse_description

MAX_TRANSACTIONS = 65_536

LOCAL, REMOTE = "local", "remote"
Key = tuple[str, str, str, str]
"""protocol, endpoint or termination, connection or stream, local or remote"""


@dataclass(slots=True)
class GatewayControl:
    """Goes through the messages of call agents and gateways in time order."""

    terms: list[MediaTerm] = field(default_factory=list)
    _open: dict[Key, dict[int, MediaTerm]] = field(default_factory=dict)
    _commands: dict[tuple[int, str], MgcpMessage] = field(default_factory=dict)
    """MGCP commands that may be answered yet, by transaction and by the host that the answer goes to"""
    _contexts: dict[tuple[int, str], list[MediaTerm]] = field(default_factory=dict)
    """terms whose H.248 context the gateway has to choose yet"""

    def awaits(self, transaction: int, destination: str) -> bool:
        """Whether an MGCP command of that number waits for an answer to a host."""
        return (transaction, _host(destination)) in self._commands

    def mgcp(self, message: MgcpMessage, row: SignallingMessage) -> None:
        """Takes a command or a response in; fills in the row."""
        row.cseq = str(message.transaction)
        row.status_code = message.status or None
        if message.verb:
            row.message, row.target, row.call_id = message.verb, message.endpoint, message.call_id
            if len(self._commands) < MAX_TRANSACTIONS:
                self._commands[message.transaction, _host(row.source)] = message
            command, which = message, REMOTE
        else:
            row.message = f"{message.status} {message.comment}".rstrip()
            command = self._commands.get((message.transaction, _host(row.destination)), message)
            row.target, row.call_id = command.endpoint, command.call_id
            which = LOCAL
        connection = message.connection or command.connection
        if command.verb == "DLCX" and not message.verb and 200 <= message.status < 300:
            self._end(row.time_ns, "MGCP", command.endpoint, command.connection, command.call_id)
        if message.description is not None and message.status < 300:
            row.description = message.description
            key = ("MGCP", command.endpoint, connection, which)
            direction = command.mode if command.mode in DIRECTIONS and which == LOCAL else ""
            self._announce(key, message.description, row, command.call_id, direction)
        if which == LOCAL and message.connection and not command.connection:
            self._name_connection(command.endpoint, message.connection)

    def h248(self, message: H248Message, transaction: H248Transaction, row: SignallingMessage) -> list[str]:
        """Takes a transaction or a reply in; fills in the row and says what could not be read."""
        faults: list[str] = []
        row.cseq, row.message = str(transaction.number), transaction.summary
        row.call_id, row.target = transaction.context, message.sender
        for one in transaction.descriptors:
            try:
                description = parse_description(one.octets)
            except MalformedPacket as error:
                faults.append(str(error))
                continue
            row.description = row.description or description
            place = len(self.terms)
            key = ("H.248", one.termination, one.stream, one.which)
            self._announce(key, description, row, one.context, one.mode if one.which == LOCAL else "")
            if one.context == "$" and len(self._contexts) < MAX_TRANSACTIONS:
                waiting = self._contexts.setdefault((transaction.number, _host(row.source)), [])
                waiting += self.terms[place:]
            elif transaction.reply:
                for term in self._contexts.pop((transaction.number, _host(row.destination)), ()):
                    term.call_id = one.context
        for termination in transaction.subtracted:
            self._end(row.time_ns, "H.248", termination, "", "")
        return faults

    def _announce(
        self, key: Key, description: SessionDescription, row: SignallingMessage, call_id: str, direction: str
    ) -> None:
        current = self._open.setdefault(key, {})
        for place, section in enumerate(description.media):
            said = replace(section, direction=direction) if direction else section
            term = media_term(said, row.time_ns, "", row, place)
            term.call_id, term.connection = call_id, f"{key[1]} {key[2]}".strip()
            old = current.pop(place, None)
            if old is not None:
                old.until_ns = row.time_ns
            if section.port:
                current[place] = term
                self.terms.append(term)

    def _name_connection(self, endpoint: str, connection: str) -> None:
        """The gateway chose the name of a connection that the command had described without one."""
        waiting = self._open.pop(("MGCP", endpoint, "", REMOTE), {})
        for term in waiting.values():
            term.connection = f"{endpoint} {connection}"
        if waiting:
            self._open[("MGCP", endpoint, connection, REMOTE)] = waiting

    def _end(self, time_ns: int, protocol: str, endpoint: str, connection: str, call_id: str) -> None:
        for key in [key for key in self._keys(protocol, endpoint) if connection in ("", key[2])]:
            for place, term in list(self._open[key].items()):
                if call_id in ("", term.call_id):
                    term.until_ns = time_ns
                    del self._open[key][place]
            if not self._open[key]:
                del self._open[key]

    def _keys(self, protocol: str, endpoint: str) -> list[Key]:
        return [key for key in self._open if key[0] == protocol and key[1] == endpoint]


def _host(place: str) -> str:
    return place.rpartition(":")[0]
