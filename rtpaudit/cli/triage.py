"""One complaint: which call is bad, which way and how bad."""

from collections.abc import Sequence
from datetime import tzinfo
from pathlib import Path
from typing import TYPE_CHECKING

from rtpaudit.cli import narrowing, options
from rtpaudit.cli.start import settle
from rtpaudit.cli.terminal import Bar, complain, say, width
from rtpaudit.errors import NothingChosen

if TYPE_CHECKING:
    from rtpaudit.media.selection import Selection
    from rtpaudit.profile import Profile
    from rtpaudit.report.folder import Written
    from rtpaudit.signalling.payload_types import Encoding
    from rtpaudit.walk import Audit

COMPILING = "compiling the fast loops for this machine, once; later runs start at once"


def triage(
    captures: options.Captures,
    out: options.Out = None,
    payload_type: options.PayloadTypes = None,
    delay: options.Delay = None,
    profile: options.ProfileFile = None,
    zone: options.Zone = None,
    party: narrowing.Parties = None,
    at: narrowing.At = None,
    call: narrowing.Calls = None,
    near: options.Near = None,
    excerpt: narrowing.Excerpt = None,
    private: options.Private = False,
    single_file: options.SingleFile = False,
    digits: options.Digits = False,
    figures_only: options.FiguresOnly = False,
    quiet: options.Quiet = False,
    json: options.Json = False,
    fail_below: options.FailBelow = None,
) -> int:
    """Name the bad calls of a capture and write the report folder."""
    from rtpaudit.report.folder import refuse_foreign

    limit, where = options.fail_below(fail_below), options.zone(zone)
    options.refuse_shown(private, digits, excerpt)
    wanted = narrowing.selection(party, at, call, where)
    given, chosen, known_delay = options.payload_types(payload_type), options.profile(profile), options.delay_ms(delay)
    folder = out or options.folder_for(captures)
    # Now, and not after a long walk.
    refuse_foreign(folder)
    if excerpt is not None:
        from rtpaudit.report.excerpt import refuse_excerpt

        refuse_excerpt(excerpt, captures)
    with Bar(shown=not quiet and not json) as bar:
        try:
            audit = _audit(captures, chosen, given, known_delay, wanted, near, digits, not figures_only, bar, quiet)
        except NothingChosen as fault:
            raise narrowing.nothing_chosen(fault, where, private) from fault
        passed_on = [] if excerpt is None else audit.excerpt(excerpt)
        written = _write(audit, folder, not figures_only, private, single_file, where, bar)
    broken = _below(written, limit)

    from rtpaudit.cli.summary import as_json, as_text

    if json:
        say(as_json(written, audit.assessment.calls_in_all, passed_on, limit, broken))
    elif not quiet:
        say(as_text(written, audit.assessment, passed_on, where, width()))
    if broken:
        complain(f"rated below R {limit:g}: {', '.join(f'{call} ({rating:.3g})' for call, rating in broken.items())}")
    return 1 if broken else 0


def _audit(
    captures: Sequence[str],
    profile: "Profile",
    payload_types: "dict[int, Encoding]",
    delay_ms: float | None,
    select: "Selection | None",
    near: str | None,
    digits: bool,
    sound: bool,
    bar: Bar,
    quiet: bool,
) -> "Audit":
    from rtpaudit.kernels import load_without_extras, on_first_compilation
    from rtpaudit.walk import audit

    load_without_extras()
    settle()
    if not quiet:
        on_first_compilation(lambda: complain(COMPILING))
    return audit(
        *captures,
        profile=profile,
        payload_types=payload_types,
        delay_ms=delay_ms,
        select=select,
        near=near,
        digits=digits,
        sound=sound,
        progress=bar.reading,
    )


def _write(
    audit: "Audit",
    folder: Path,
    sound: bool,
    private: bool,
    single_file: bool,
    zone: tzinfo | None,
    bar: Bar,
) -> "Written":
    from rtpaudit.report.folder import write_folder

    return write_folder(
        audit, folder, audio=sound, private=private, single_file=single_file, zone=zone, progress=bar.writing
    )


def _below(written: "Written", limit: float | None) -> dict[str, float]:
    """Rating of each call that breaks the user's limit, the worst first."""
    if limit is None:
        return {}
    calls = written.tables["calls"]
    bad = calls[calls.r_factor < limit].sort_values("r_factor", kind="stable")
    return dict(zip(bad.call, bad.r_factor, strict=True))
