"""Sound of an audit as WAV files of 16-bit PCM: each direction as sent and as heard, and both sides of each call."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.results import AssessedCall
from rtpaudit.errors import UnusableOutput

Samples = NDArray[np.int16]
Sound = tuple[Samples, int]
"""samples of shape (n,), or (n, 2) with the caller left and the callee right, and their rate [Hz]"""

FRAMES_AT_ONCE = 1 << 20
SHOWN = 8
# Sizes in a WAV header have 32 bits (and some readers take them for signed); RF64 (EBU Tech 3306) carries on.
LARGEST_WAV = (1 << 31) - (1 << 16)


class AudioSource(Protocol):
    """Where sound comes from, stream by stream and call by call."""

    def why_silent(self, stream_id: str, /) -> str:
        """Why a stream gives no sound, "" where it does."""

    def sent(self, stream_id: str, /) -> Sound:
        """What the payloads of a stream say, on the RTP timeline."""

    def heard(self, stream_id: str, /) -> Sound:
        """The same after playout and concealment, as long and aligned with it."""

    def both(self, call: AssessedCall, /) -> Sound:
        """Both sides of a call as heard, on the capture's clock."""

    def origin_ns(self, stream_id: str, /) -> int:
        """Capture time of a stream's first sample."""


def write_wav(path: Path, samples: Samples, rate_hz: int) -> None:
    """Write 16-bit PCM; the file is there whole or not at all.

    Parameters
    ----------
    path : Path
        Existing files are replaced.
    samples : int16 array, shape (n,) or (n, channels)
    rate_hz : int
        Sampling rate. [Hz]

    Raises
    ------
    UnusableOutput
        Where the file cannot be written.
    """
    import soundfile

    channels = 1 if samples.ndim == 1 else samples.shape[1]
    partial = path.with_name(f".{path.name}.partial")
    container = "WAV" if samples.nbytes < LARGEST_WAV else "RF64"
    try:
        with soundfile.SoundFile(partial, "w", rate_hz, channels, "PCM_16", format=container) as file:
            # Closing would wait for the disk, file after file; a report that a power cut takes is made again.
            file.flush = _do_not_wait
            for begin in range(0, len(samples), FRAMES_AT_ONCE):
                file.write(samples[begin : begin + FRAMES_AT_ONCE])
        partial.replace(path)
    except (OSError, soundfile.LibsndfileError) as fault:
        raise UnusableOutput(f"{path}: cannot be written: {str(fault).rstrip('.')}; is the disk full?") from fault
    finally:
        partial.unlink(missing_ok=True)


def _do_not_wait() -> None:
    return


def write_audio(
    folder: Path,
    calls: Sequence[AssessedCall],
    source: AudioSource,
    progress: Callable[[int, int], None] | None = None,
    look_at: Callable[[str, Samples, int], None] | None = None,
) -> tuple[int, list[str]]:
    """Write the sound of all calls, call by call: number of files, and a caution for each reason to leave some out.

    Names are made of ids alone, never of anything that stands in a capture. ``look_at`` is shown each stream as heard.
    """
    left_out: dict[str, list[str]] = {}
    files = 0
    for done, call in enumerate(calls, start=1):
        sounding = [one.id for one in call.streams if not _silent(one.id, source, left_out)]
        for stream in sounding:
            write_wav(folder / f"{call.id}-{stream}-sent.wav", *source.sent(stream))
            heard = source.heard(stream)
            write_wav(folder / f"{call.id}-{stream}-heard.wav", *heard)
            if look_at:
                look_at(stream, *heard)
        if sounding:
            write_wav(folder / f"{call.id}.wav", *source.both(call))
            files += 2 * len(sounding) + 1
        if progress:
            progress(done, len(calls))
    return files, [f"no sound of {_listed(ids)}: {reason}" for reason, ids in left_out.items()]


def _silent(stream: str, source: AudioSource, left_out: dict[str, list[str]]) -> bool:
    reason = source.why_silent(stream)
    if reason:
        left_out.setdefault(reason, []).append(stream)
    return bool(reason)


def _listed(ids: list[str]) -> str:
    shown = ", ".join(ids[:SHOWN])
    return shown if len(ids) <= SHOWN else f"{shown} and {len(ids) - SHOWN} more streams"
