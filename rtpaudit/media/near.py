"""At which end of each call the capture was taken, by an address that the user says is near."""

from collections.abc import Callable, Sequence
from ipaddress import IPv4Network, IPv6Network, ip_address, ip_network

from rtpaudit.errors import UnusableArguments
from rtpaudit.media.calls import Call
from rtpaudit.media.selection import host_of
from rtpaudit.signalling.calls import CALLEE, CALLER

UNKNOWN = "unknown"


def note_near_ends(calls: Sequence[Call], near: str) -> None:
    """Set ``near`` of every call: the side that has the address, where exactly one has it.

    ``near`` is an address or a prefix such as 192.0.2.0/24.

    Raises
    ------
    UnusableArguments
        If it is neither, or no call has an end there.
    """
    try:
        network = ip_network(near.strip().strip("[]"), strict=False)
    except ValueError as fault:
        raise UnusableArguments(f"{near!r} is no address and no prefix; write it as in 192.0.2.10") from fault
    for call in calls:
        here = [side for side in (CALLER, CALLEE) if any(map(_within(network), _addresses(call, side)))]
        call.near = here[0] if len(here) == 1 else UNKNOWN
    if calls and all(call.near == UNKNOWN for call in calls):
        raise UnusableArguments("no call has just one end at the address said to be near; streams.csv lists addresses")


def _within(network: IPv4Network | IPv6Network) -> Callable[[str], bool]:
    def within(host: str) -> bool:
        try:
            return ip_address(host) in network
        except ValueError:
            return False

    return within


def _addresses(call: Call, side: str) -> list[str]:
    """Where one side is, as its packets and its words say; each once."""
    said, heard = (call.from_caller, call.from_callee) if side == CALLER else (call.from_callee, call.from_caller)
    hosts = [stream.source for stream in said] + [stream.destination for stream in heard]
    if call.signalled is not None:
        party = call.signalled.caller if side == CALLER else call.signalled.callee
        hosts += [term.address for term in call.signalled.media if term.side == side]
        hosts.append(host_of(party))
    return list(dict.fromkeys(host for host in hosts if host))
