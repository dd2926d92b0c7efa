"""The report folder: filled under another name beside its place, then put there as a whole."""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import tzinfo
from itertools import count
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol

from rtpaudit.assess.results import Assessment
from rtpaudit.errors import UnusableOutput
from rtpaudit.profile import Profile
from rtpaudit.report.clock import Clock
from rtpaudit.report.document import OPENING, document, profile_of
from rtpaudit.report.page import Shown, write_page
from rtpaudit.report.plots import detail_for
from rtpaudit.report.privacy import Pseudonyms, new_key
from rtpaudit.report.rows import csv_lines
from rtpaudit.report.sounds import Place, Sounds
from rtpaudit.report.wav import AudioSource, write_audio
from rtpaudit.report.waveform import Waveforms

if TYPE_CHECKING:
    from pandas import DataFrame

CAUTION = (
    "Recordings of calls are personal data: listening to them, keeping them and passing them on may need the consent "
    "of those who spoke, or be forbidden by the law of interception; local rules decide. Delete what is no longer "
    "needed. Sound from a capture can be loud without warning: start quietly."
)
NOT_OURS = "is there and was not written by rtpaudit; choose another --out, or move it away"


Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class Mark:
    """By what a folder of ours is known: a file in it, and how that begins."""

    file: str
    opening: bytes


REPORT = Mark("audit.json", OPENING)


class Audited(Protocol):
    """What the folder needs of an audit."""

    @property
    def assessment(self) -> Assessment:
        """Streams, calls and damage."""

    @property
    def profile(self) -> Profile:
        """What the user set."""

    @property
    def sound(self) -> AudioSource:
        """Where the sound comes from."""

    @property
    def tables(self) -> Mapping[str, DataFrame]:
        """Every table by name."""


@dataclass(frozen=True, slots=True)
class Written:
    """What stands in the folder."""

    folder: Path
    tables: Mapping[str, DataFrame]
    """as written: with pseudonyms where the report is private"""
    captures: list[str]
    audio_files: int
    cautions: list[str]


def write_folder(
    audit: Audited,
    folder: Path,
    *,
    audio: bool = True,
    private: bool = False,
    single_file: bool = False,
    zone: tzinfo | None = None,
    progress: Progress | None = None,
) -> Written:
    """Write the report of an audit in place of one that stands there, or not at all.

    Parameters
    ----------
    audit : Audited
    folder : Path
    audio : bool
        Whether sound is written.
    private : bool
        Pseudonyms, and no sound.
    single_file : bool
        Whether the page holds every call and its sound itself.
    zone : tzinfo, optional
        In which the page shows times; the machine's own where left out.
    progress : callable, optional
        Told how many steps are done, of how many: each call's sound, then its part of the page.

    Raises
    ------
    UnusableOutput
        Where the place cannot be written, or holds anything that rtpaudit did not write.
    """
    tables, captures = audit.tables, audit.assessment.captures
    calls, cautions, audio_files = audit.assessment.calls, [CAUTION], 0
    if private:
        names = Pseudonyms(new_key(), captures)
        tables, captures = names.tables(tables), [names.file(name) for name in captures]
        calls = names.calls(calls)
    waveforms = Waveforms(audit.sound.heard, detail_for(len(calls)).envelope)
    place: Place = "nowhere" if private or not audio else "inside" if single_file else "folder"
    with new_folder(folder) as partial:
        if place != "nowhere":
            (partial / "audio").mkdir()
            audio_files, left_out = write_audio(
                partial / "audio", calls, audit.sound, _part(progress, 0, 2), waveforms.take
            )
            cautions += left_out
        for name, frame in tables.items():
            _write(partial / f"{name}.csv", csv_lines(name, frame))
            _write_parquet(partial / f"{name}.parquet", frame)
        _write(partial / "audit.json", document(tables, captures, profile_of(audit.profile, private), cautions))
        sounds = Sounds(audit.sound, waveforms, place)
        shown = Shown(tables, calls, captures, sounds, Clock(zone), audit.profile.playout, cautions, single_file)
        write_page(partial, shown, _part(progress, 0, 1) if place == "nowhere" else _part(progress, 1, 2))
    return Written(folder, tables, captures, audio_files, cautions)


def refuse_foreign(folder: Path, mark: Mark = REPORT) -> None:
    """Refuse a place where anything stands that rtpaudit did not write, or wrote as something else."""
    try:
        with open(folder / mark.file, "rb") as file:
            ours = file.read(len(mark.opening)) == mark.opening
    except OSError:
        ours = not folder.exists() and not folder.is_symlink()
    if not ours:
        raise UnusableOutput(f"{folder}: {NOT_OURS}")


@contextmanager
def new_folder(folder: Path, mark: Mark = REPORT) -> Iterator[Path]:
    """A folder to fill, which takes the place of ``folder`` once all went well, and else disappears."""
    refuse_foreign(folder, mark)
    place = folder.resolve()
    partial = _beside(place, "partial")
    try:
        partial.mkdir(parents=True)
        yield partial
        _put(partial, place, mark)
    except OSError as fault:
        raise UnusableOutput(f"{folder}: cannot be written: {fault.strerror or fault}; choose another --out") from fault
    finally:
        shutil.rmtree(partial, ignore_errors=True)


def _part(progress: Progress | None, part: int, parts: int) -> Progress | None:
    """Progress of one part of the work, as part of all of it."""
    if progress is None:
        return None
    return lambda done, total: progress(part * total + done, parts * total)


def _put(partial: Path, place: Path, mark: Mark) -> None:
    """Rename ``partial`` to ``place``; what stood there comes back where that fails."""
    refuse_foreign(place, mark)
    if not place.exists():
        partial.rename(place)
        return
    earlier = _beside(place, "earlier")
    place.rename(earlier)
    try:
        partial.rename(place)
    finally:
        if not place.exists():
            earlier.rename(place)
    shutil.rmtree(earlier, ignore_errors=True)


def _beside(place: Path, what: str) -> Path:
    """A free name next to ``place``, so that a rename stays within one file system."""
    names = (place.with_name(f".{place.name}.{what}-{os.getpid()}-{attempt}") for attempt in count())
    return next(name for name in names if not name.exists())


def _write(path: Path, buffers: Iterable[Any]) -> None:
    with open(path, "wb") as file:
        for buffer in buffers:
            file.write(buffer)


def _write_parquet(path: Path, frame: DataFrame) -> None:
    import pyarrow as pa
    from pyarrow import parquet

    parquet.write_table(pa.Table.from_pandas(frame, preserve_index=False), path, compression="zstd")
