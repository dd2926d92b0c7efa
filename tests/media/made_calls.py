"""Calls made by hand, as they are before anything is measured."""

from typing import Any

from rtpaudit.media.calls import Call
from rtpaudit.signalling.calls import CALLEE, CALLER, MediaTerm, Party, SipCall

S = 1_000_000_000
START_NS = 1_772_534_520 * S
"""2026-03-03 10:42:00 UTC"""


def party(user: str, host: str, **more: str) -> Party:
    return Party(user=user, uri=f"sip:{user}@{host}", address=f"{host}:5060", **more)


def sip_call(call_id: str, caller: Party, callee: Party, **more: Any) -> SipCall:
    whole: dict[str, Any] = {
        "started_ns": 0, "answered_ns": 0, "released_ns": 0, "ended_ns": 0, "outcome": "answered", "status_code": 200,
        "setup_delay_s": 0.1, "release_by": "caller",
    }  # fmt: skip
    return SipCall(call_id, caller, callee, **(whole | more))


def call(number: int, caller: Party | str, callee: Party | str, from_s: float, to_s: float, **more: Any) -> Call:
    """The call ``c0N`` from and to seconds after 10:42; signalled where the parties are more than addresses."""
    said, names = None, [one if isinstance(one, str) else one.user for one in (caller, callee)]
    if isinstance(caller, Party) and isinstance(callee, Party):
        said = sip_call(f"dialog-{number}@example.com", caller, callee, **more)
    return Call(
        0, "made.pcap", names[0], names[1], START_NS + round(from_s * S), START_NS + round(to_s * S), signalled=said,
        id=f"c{number:02d}",
    )  # fmt: skip


def term(side: str, address: str, port: int = 4000) -> MediaTerm:
    assert side in (CALLER, CALLEE)
    return MediaTerm(0, None, side, "audio", address, port, "RTP/AVP", "sendrecv", {})
