"""Sound in the page: where it lies on the axis of its call, how it looks, and, in a single file, the sound itself."""

from __future__ import annotations

import base64
import io
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.report.waveform import Waveforms
from rtpaudit.units import NS_PER_MS

if TYPE_CHECKING:
    from rtpaudit.report.wav import AudioSource, Samples

Place = Literal["folder", "inside", "nowhere"]

SENT, HEARD = "sent", "heard"
MOST_INSIDE = 48 << 20
"""octets of coded sound in a single file: a browser reads it at once, a mail server hardly takes it"""


@dataclass(slots=True)
class Sounds:
    """The sound of an audit for its page."""

    source: AudioSource
    waveforms: Waveforms
    place: Place
    """where it is kept: files in the folder, inside the page, or nowhere"""

    def of(self, one: AssessedStream, call: AssessedCall) -> dict[str, Any] | None:
        """Where a stream's sound begins [ms of the call], how it looks, and which files hold it; None without any."""
        if self.source.why_silent(one.id):
            return None
        skew = one.figures.clock_skew_ppm
        return {
            "begin": round((self.source.origin_ns(one.id) - call.started_ns) / NS_PER_MS, 2),
            # Seconds of the file that pass in a second of the axis.
            "pace": 1.0 if skew != skew else 1.0 + skew * 1e-6,
            "files": {}
            if self.place == "nowhere"
            else {SENT: f"{call.id}-{one.id}-sent", HEARD: f"{call.id}-{one.id}-heard"},
            **self.waveforms.of(one.id).as_plain(),
        }

    def both(self, call: AssessedCall) -> dict[str, Any] | None:
        """The same of both directions together, as heard; None where they do not lie in one file."""
        sounding = [one for one in call.streams if not self.source.why_silent(one.id)]
        if self.place != "folder" or not sounding:
            return None
        begin_ns = min(self.source.origin_ns(one.id) for one in sounding)
        return {"begin": round((begin_ns - call.started_ns) / NS_PER_MS, 2), "file": call.id}

    def inside(self, call: AssessedCall) -> dict[str, str]:
        """The sound of a call as text by the name of its file: FLAC in base64.

        FLAC keeps every sample, which a lossy code on top of the call's own would not, at a third of a WAV file; all
        current browsers play it.
        """
        texts = {}
        for one in call.streams:
            if not self.source.why_silent(one.id):
                texts[f"{call.id}-{one.id}-sent"] = _coded(*self.source.sent(one.id))
                texts[f"{call.id}-{one.id}-heard"] = _coded(*self.source.heard(one.id))
        return texts


def _coded(samples: Samples, rate_hz: int) -> str:
    import soundfile

    file = io.BytesIO()
    soundfile.write(file, samples, rate_hz, format="FLAC", subtype="PCM_16")
    return base64.b64encode(file.getvalue()).decode("ascii")
