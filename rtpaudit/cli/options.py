"""Options that commands share, and what their texts mean."""

from collections.abc import Sequence
from datetime import tzinfo
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from rtpaudit.errors import UnusableArguments

if TYPE_CHECKING:
    from rtpaudit.profile import Profile
    from rtpaudit.signalling.payload_types import Encoding

Captures = Annotated[
    list[str],
    typer.Argument(metavar="CAPTURE", help="pcap or pcapng, also gzip, xz or zstd; - is standard input."),
]
Out = Annotated[Path | None, typer.Option("--out", metavar="DIR", help="Report folder; NAME-audit where left out.")]
PayloadTypes = Annotated[
    list[str] | None,
    typer.Option("--payload-type", metavar="96=G722/8000", help="Encoding of a payload type; may be given again."),
]
Delay = Annotated[float | None, typer.Option("--delay", metavar="MS", help="Known one-way delay of the network.")]
ProfileFile = Annotated[
    Path | None,
    typer.Option("--profile", metavar="FILE", help="Playout buffer, planning values and limits, as TOML."),
]
Zone = Annotated[str | None, typer.Option("--zone", metavar="NAME", help="Time zone to show times in: Europe/Vienna.")]
Near = Annotated[
    str | None,
    typer.Option("--near", metavar="ADDRESS", help="Address, or prefix, of the end at which the capture was taken."),
]
Private = Annotated[bool, typer.Option("--private", help="Pseudonyms for parties and addresses, no digits, no sound.")]
Digits = Annotated[bool, typer.Option("--digits", help="Show the digits dialled within calls; masked by x otherwise.")]
SingleFile = Annotated[
    bool, typer.Option("--single-file", help="Put all calls and their sound into index.html, to pass it on alone.")
]
FiguresOnly = Annotated[
    bool,
    typer.Option(
        "--figures-only", help="Leave the sound alone: no WAV files, nothing measured in it, many times faster."
    ),
]
Quiet = Annotated[bool, typer.Option("--quiet", help="No summary and no progress.")]
Json = Annotated[bool, typer.Option("--json", help="The summary on standard output as JSON, and nothing else.")]
FailBelow = Annotated[
    float | None,
    typer.Option("--fail-below", metavar="R", help="Exit status 1 where a call is rated below R."),
]

LONGEST_DELAY_MS = 5000.0
# Endings that a capture's name may have and its report's need not.
_ENDINGS = {".gz", ".xz", ".zst", ".pcap", ".pcapng", ".cap", ".ntar", ".dump"}


def folder_for(captures: Sequence[str]) -> Path:
    """Report folder for captures where the user names none: that of the first, in the current directory."""
    if captures[0] == "-":
        return Path("stdin-audit")
    name = Path(captures[0]).name
    while Path(name).suffix.lower() in _ENDINGS:
        name = Path(name).stem
    return Path(f"{name}-audit")


def payload_types(texts: Sequence[str] | None) -> dict[int, "Encoding"]:
    """Encodings by payload type. UnusableArguments where one is told twice and differently."""
    from rtpaudit.signalling.payload_types import parse_given

    given: dict[int, Encoding] = {}
    for number, encoding in map(parse_given, texts or ()):
        if given.setdefault(number, encoding) != encoding:
            raise UnusableArguments(f"--payload-type says two things of {number}; give it once")
    return given


def delay_ms(delay: float | None) -> float | None:
    """The delay, which is refused where no network could have it."""
    if delay is not None and not 0.0 <= delay <= LONGEST_DELAY_MS:
        raise UnusableArguments(f"--delay {delay:g} is not within 0 to {LONGEST_DELAY_MS:g} ms")
    return delay


def fail_below(limit: float | None) -> float | None:
    """The limit, which is refused where it is no rating."""
    if limit is not None and not 0.0 <= limit <= 100.0:
        raise UnusableArguments(f"--fail-below {limit:g} is not within 0 to 100, where ratings lie")
    return limit


def refuse_shown(private: bool, digits: bool, excerpt: Path | None) -> None:
    """Where a report is private, no digits are shown and no packets passed on."""
    if private and digits:
        raise UnusableArguments("--private shows no digits; leave out --digits")
    if private and excerpt is not None:
        raise UnusableArguments("--private passes on no packets, which hold names and voices; leave out --excerpt")


def profile(path: Path | None) -> "Profile":
    """The profile of a file, or the one that holds without."""
    from rtpaudit.profile import Profile

    return Profile() if path is None else Profile.read(path)


def zone(name: str | None) -> tzinfo | None:
    """The time zone of a name, None for the machine's own."""
    if name is None:
        return None
    from zoneinfo import ZoneInfo

    try:
        return ZoneInfo(name)
    # Besides unknown names: "", "..", the name of a folder of zones.
    except (LookupError, ValueError, OSError) as fault:
        raise UnusableArguments(f"--zone {name!r} is no time zone; write it as in Europe/Vienna or UTC") from fault
