"""The folder of a listening check: one part for the listeners, and beside it the key."""

import json
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from pathlib import Path

from rtpaudit import __version__
from rtpaudit.assess.results import Assessment
from rtpaudit.errors import UnusableArguments, UnusableOutput
from rtpaudit.listen.clips import make_clips
from rtpaudit.listen.key import KEY, KeyRow, check_id, key_lines, key_rows
from rtpaudit.listen.safety import FAST_OVER_DB, MOST_GAIN_DB, SLOW_OVER_DB
from rtpaudit.listen.sheet import SHEET, rating_sheet
from rtpaudit.profile import Listening
from rtpaudit.report.folder import CAUTION, Audited, Mark, new_folder, refuse_foreign
from rtpaudit.report.wav import AudioSource, write_wav

LISTENERS = "listeners"
"""what is handed on: the sheet and its clips, and nothing that tells what they are"""
CLIPS = "clips"
ABOUT = "listening.json"
SCHEMA, SCHEMA_VERSION = "rtpaudit listening check", 1
MARK = Mark(ABOUT, f'{{\n "schema": "{SCHEMA}",\n "schema_version": '.encode())


@dataclass(frozen=True, slots=True)
class Written:
    """What stands in the folder."""

    folder: Path
    check: str
    rows: list[KeyRow]


def refuse_listening_folder(folder: Path) -> None:
    """Refuse a place that is not ours to replace, or where somebody keeps more than we wrote: ratings, above all."""
    refuse_foreign(folder, MARK)
    ours = {ABOUT, KEY, LISTENERS}
    others = [path.name for path in sorted(folder.iterdir()) if path.name not in ours] if folder.exists() else []
    inside = folder / LISTENERS
    if inside.is_dir():
        others += [path.name for path in sorted(inside.iterdir()) if path.name not in (SHEET, CLIPS)]
    if others:
        raise UnusableOutput(f"{folder}: holds {others[0]}, which would be lost; choose another --out, or move it away")


def write_listening_folder(audit: Audited, folder: Path, count: int, seed: int, *, digits: bool = False) -> Written:
    """Write clips, sheet and key of an audit in place of those that stand there, or nothing at all.

    Parameters
    ----------
    audit : Audited
    folder : Path
    count : int
        Clips at most.
    seed : int
        Of their order.
    digits : bool
        Whether clips may hold keys pressed.

    Raises
    ------
    UnusableArguments
        If the audit has no passage of which a clip can be made.
    UnusableOutput
        Where the place cannot be written, or holds anything that rtpaudit did not write.
    """
    refuse_listening_folder(folder)
    assessment, settings = audit.assessment, audit.profile.listening
    clips = make_clips(assessment, audit.tables["findings"], audit.sound, audit.profile, count, seed, digits)
    if not clips:
        raise UnusableArguments(f"{', '.join(assessment.captures)}: {_why_none(assessment, audit.sound)}")
    check = check_id(clips)
    rows = key_rows(clips, check)
    with new_folder(folder, MARK) as partial:
        inside = partial / LISTENERS
        (inside / CLIPS).mkdir(parents=True)
        for clip, row in zip(clips, rows, strict=True):
            write_wav(inside / CLIPS / f"{row.clip}.wav", clip.levelled.samples, clip.rate_hz)
        sheet = rating_sheet(check, [row.clip for row in rows], CLIPS, [clip.duration_s for clip in clips])
        (inside / SHEET).write_text(sheet, "utf-8")
        (partial / KEY).write_text("\n".join([*key_lines(rows), ""]), "utf-8")
        (partial / ABOUT).write_text(_about(check, settings, seed, assessment.captures, len(clips)), "utf-8")
    return Written(folder, check, rows)


def _why_none(assessment: Assessment, source: AudioSource) -> str:
    """Why there is nothing to listen to, in one sentence."""
    reasons = dict.fromkeys(source.why_silent(one.id) for one in assessment.streams)
    said = "; ".join(reason for reason in reasons if reason)
    if not assessment.streams:
        return "no stream of RTP was found, so there is nothing to listen to"
    return f"no passage of speech is long enough for a clip{f' ({said})' if said else ''}"


def _about(check: str, settings: Listening, seed: int, captures: Sequence[str], clips: int) -> str:
    about = {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "rtpaudit": __version__,
        "check": check,
        "seed": seed,
        "clips": clips,
        "captures": list(captures),
        "listening": asdict(settings),
        "limits": {
            "peak_dbov": settings.peak_dbov,
            "level_125_ms_dbov": settings.level_dbov + FAST_OVER_DB,
            "level_1_s_dbov": settings.level_dbov + SLOW_OVER_DB,
            "gain_db": MOST_GAIN_DB,
        },
        "cautions": [CAUTION],
    }
    return json.dumps(about, indent=1, allow_nan=False) + "\n"
