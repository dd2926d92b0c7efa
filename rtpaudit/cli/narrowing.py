"""Options that narrow a triage down to some calls, and what is said where they fit none."""

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta, tzinfo
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from rtpaudit.errors import NearCall, NothingChosen, UnusableArguments
from rtpaudit.units import NS_PER_S

if TYPE_CHECKING:
    from rtpaudit.media.selection import Selection

Parties = Annotated[
    list[str] | None,
    typer.Option("--party", metavar="TEXT", help="Only calls of a number, URI, name or address; again for the other."),
]
At = Annotated[
    str | None,
    typer.Option("--at", metavar="TIME", help="Only calls that went on at 10:42, 10:42:17 or 2026-03-03 10:42."),
]
Calls = Annotated[
    list[str] | None,
    typer.Option("--call", metavar="ID", help="Only the call c07, or the one of a Call-ID; may be given again."),
]

Excerpt = Annotated[
    Path | None,
    typer.Option("--excerpt", metavar="FILE", help="Write the packets of these calls as pcapng, to pass on."),
]

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def selection(
    parties: Sequence[str] | None, at: str | None, calls: Sequence[str] | None, zone: tzinfo | None
) -> "Selection | None":
    """The calls that the options mean, None where they say nothing."""
    if parties is None and at is None and calls is None:
        return None
    from rtpaudit.media.selection import Selection

    if at is not None and not at.strip():
        raise UnusableArguments("--at is empty; write a time as in 10:42 or 2026-03-03 10:42")
    return Selection(tuple(parties or ()), at or "", tuple(calls or ()), zone)


def nothing_chosen(fault: NothingChosen, zone: tzinfo | None, private: bool) -> UnusableArguments:
    """One line with the calls that come nearest, and without a name where there are to be none."""
    if not fault.missing:
        what = "no call is what was asked for"
    elif private:
        what = "a call named by --call is not there"
    else:
        what = f"there is no call {', '.join(fault.missing)}"
    if not fault.nearest:
        return UnusableArguments(f"{what}; no call was found at all")
    nearest = ", ".join(_named(one, zone, private) for one in fault.nearest)
    return UnusableArguments(f"{what}; nearest are {nearest}; choose with --call")


def _named(call: NearCall, zone: tzinfo | None, private: bool) -> str:
    begun = (_EPOCH + timedelta(microseconds=call.started_ns // 1000)).astimezone(zone)
    when = f"{begun:%Y-%m-%d %H:%M:%S} for {(call.ended_ns - call.started_ns) / NS_PER_S:.0f} s"
    parties = "" if private else f", {call.caller} → {call.callee}"
    return f"{call.id} ({when}{parties})"
