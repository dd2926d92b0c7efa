"""Listening check: clips and a rating sheet out of captures, and an outcome out of the ratings."""

import secrets
from collections.abc import Sequence
from dataclasses import asdict
from datetime import datetime, tzinfo
from json import dumps
from pathlib import Path
from textwrap import fill
from typing import TYPE_CHECKING, Annotated

import typer

from rtpaudit.cli import options
from rtpaudit.cli.start import settle
from rtpaudit.cli.terminal import Bar, complain, say, visible, width
from rtpaudit.cli.triage import COMPILING
from rtpaudit.errors import UnusableArguments

if TYPE_CHECKING:
    from rtpaudit.listen.folder import Written
    from rtpaudit.profile import Profile
    from rtpaudit.signalling.payload_types import Encoding
    from rtpaudit.walk import Audit

MOST_CLIPS = 100
PRIVATE = "listen writes sound, which --private leaves out: use one or the other"
MIND = (
    "Mind consent, interception law and retention: local rules decide whom you may let listen. Clips are levelled and "
    "their peaks limited; listeners should start quietly all the same."
)

Files = Annotated[
    list[str],
    typer.Argument(metavar="FILE", help="Captures, or with --ratings the files that the listeners saved."),
]
Out = Annotated[
    Path | None,
    typer.Option("--out", metavar="DIR", help="Folder; NAME-listening, or listening-outcome, where left out."),
]
Ratings = Annotated[bool, typer.Option("--ratings", help="Join ratings with the key; no capture is needed.")]
Key = Annotated[
    Path | None,
    typer.Option("--key", metavar="FILE", help="Key of the check; sought beside the ratings where left out."),
]
Clips = Annotated[int, typer.Option("--clips", metavar="N", help="Clips at most, a third of them anchors.")]
Seed = Annotated[
    int | None,
    typer.Option("--seed", metavar="N", help="The same number gives the same order; by chance where left out."),
]


def listen(
    files: Files,
    out: Out = None,
    ratings: Ratings = False,
    key: Key = None,
    clips: Clips = 12,
    seed: Seed = None,
    payload_type: options.PayloadTypes = None,
    delay: options.Delay = None,
    profile: options.ProfileFile = None,
    zone: options.Zone = None,
    private: options.Private = False,
    digits: options.Digits = False,
    quiet: options.Quiet = False,
    json: options.Json = False,
) -> int:
    """Write clips and a rating sheet for listeners, or work out what they said."""
    where = options.zone(zone)
    if ratings:
        return _outcome(list(map(Path, files)), out or Path("listening-outcome"), key, private, quiet, json)
    if key is not None:
        raise UnusableArguments("--key goes with --ratings; clips bring a key of their own")
    if private:
        raise UnusableArguments(PRIVATE)
    if not 1 <= clips <= MOST_CLIPS:
        raise UnusableArguments(f"--clips {clips} is not within 1 to {MOST_CLIPS}")
    given, chosen, known_delay = options.payload_types(payload_type), options.profile(profile), options.delay_ms(delay)
    folder = out or Path(f"{options.folder_for(files).name.removesuffix('-audit')}-listening")
    seed = secrets.randbits(32) if seed is None else seed

    from rtpaudit.listen.folder import refuse_listening_folder, write_listening_folder

    # Now, and not after a long walk.
    refuse_listening_folder(folder)
    with Bar(shown=not quiet and not json) as bar:
        audit = _audit(files, chosen, given, known_delay, bar, quiet)
        written = write_listening_folder(audit, folder, clips, seed, digits=digits)
    if json:
        say(as_json(written))
    elif not quiet:
        say(as_text(written, clips, where))
    return 0


def _audit(
    captures: Sequence[str],
    profile: "Profile",
    payload_types: "dict[int, Encoding]",
    delay_ms: float | None,
    bar: Bar,
    quiet: bool,
) -> "Audit":
    from rtpaudit.kernels import load_without_extras, on_first_compilation
    from rtpaudit.walk import audit

    load_without_extras()
    settle()
    if not quiet:
        on_first_compilation(lambda: complain(COMPILING))
    return audit(*captures, profile=profile, payload_types=payload_types, delay_ms=delay_ms, progress=bar.reading)


def _outcome(ratings: Sequence[Path], folder: Path, key: Path | None, private: bool, quiet: bool, json: bool) -> int:
    """Join ratings with their key."""
    from rtpaudit.listen.outcome import MARK, work_out, write_outcome
    from rtpaudit.listen.words import outcome_text
    from rtpaudit.report.folder import refuse_foreign

    refuse_foreign(folder, MARK)
    outcome = work_out(ratings, key, private)
    write_outcome(outcome, folder)
    if json:
        head = {"schema": "rtpaudit listening outcome", "schema_version": 1, "folder": str(folder)}
        say(dumps({**head, **outcome.figures(), "opinions": outcome.clips()}, indent=1, allow_nan=False))
    elif not quiet:
        lines = [fill(visible(line), width()) for line in outcome_text(outcome.figures(), outcome.clips()).split("\n")]
        say(
            "\n".join(
                [*lines, "", f"Written to {visible(str(folder))}: index.html, opinions.csv, listeners.csv, votes.csv."]
            )
        )
    return 0


def as_text(written: "Written", asked: int, zone: tzinfo | None) -> str:
    """What was written and what to do with it, for people."""
    from rtpaudit.findings.words import many
    from rtpaudit.listen.folder import LISTENERS
    from rtpaudit.listen.key import KEY
    from rtpaudit.listen.places import WORST

    count, worst = len(written.rows), sum(row.kind == WORST for row in written.rows)
    made = f"{many(count, 'clip')}: {many(worst, 'impaired passage')}, {many(count - worst, 'anchor')}."
    if count < asked:
        made += f" Of the {asked} that were asked for there are no more that hold speech."
    lines = []
    for row in written.rows:
        at = datetime.fromisoformat(row.started).astimezone(zone)
        missing = f"{row.packets_lost + row.packets_discarded} of {row.packets_expected} packets missing"
        line = f"  {row.clip}  {row.call} {row.stream} {at:%H:%M:%S}  {missing}; {row.kind}: {row.reason}"
        lines.append(fill(line, width(), subsequent_indent=" " * 11))
    place = visible(str(written.folder))
    told = [
        f"{place}/{LISTENERS} is for the listeners: a rating sheet and clips, and nothing that tells what they are.",
        f"{place}/{KEY} is for you: keep it apart from them.",
        f"Then: rtpaudit listen --ratings FILE… --key {place}/{KEY}",
        MIND,
    ]
    return "\n".join(
        [fill(made, width()), "", *lines, "", *(fill(one, width(), break_long_words=False) for one in told)]
    )


def as_json(written: "Written") -> str:
    """The same for programs."""
    rows = [{name: None if value != value else value for name, value in asdict(row).items()} for row in written.rows]
    head = {"schema": "rtpaudit listening check", "schema_version": 1}
    return dumps(
        {**head, "folder": str(written.folder), "check": written.check, "clips": rows}, indent=1, allow_nan=False
    )
