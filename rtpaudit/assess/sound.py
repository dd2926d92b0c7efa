"""The sound of streams and calls: payloads decoded and laid on the RTP timeline, directions laid side by side."""

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.ear import heard_samples
from rtpaudit.assess.laying import LONGEST_TIMELINE_S, Laid, at_rate, lay_out, sent_samples, silence_reason
from rtpaudit.assess.long_sound import silence
from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.capture.frames import Octets
from rtpaudit.errors import MissingCodec
from rtpaudit.units import NS_PER_S

Samples = NDArray[np.int16]


KEPT, LARGEST_KEPT = 6, 8_000_000
"""sounds that are kept for the next question, and samples that one may have: a call is asked for piece by piece"""


class SoundSource:
    """Decoded audio of one audit's streams, made when it is asked for; the latest few are kept."""

    def __init__(
        self, buffers: Sequence[Sequence[Octets]], streams: Sequence[AssessedStream], conceals_loss: bool = True
    ) -> None:
        self.buffers = buffers
        self._conceals_loss = conceals_loss
        self._streams = {one.id: one for one in streams}
        self._recent: dict[tuple[str, str], Samples] = {}

    def _kept(self, what: str, stream_id: str, make: Callable[[], Samples]) -> Samples:
        found = self._recent.get((what, stream_id))
        if found is None:
            found = make()
            if len(found) <= LARGEST_KEPT:
                self._recent[what, stream_id] = found
                if len(self._recent) > KEPT:
                    del self._recent[next(iter(self._recent))]
        return found

    def why_silent(self, stream_id: str) -> str:
        """Reason why a stream has no audio, "" where it has."""
        stream = self._streams[stream_id].stream
        return silence_reason(stream)

    def sent(self, stream_id: str) -> tuple[Samples, int]:
        """Every received payload on the RTP timeline, silence where lost; and the sampling rate. MissingCodec."""
        one = self._streams[stream_id]
        laid = lay_out(one.stream)
        return self._sent(one, laid), laid.rate_hz

    def heard(self, stream_id: str) -> tuple[Samples, int]:
        """The same after the playout buffer and concealment, as long as sent. MissingCodec."""
        one = self._streams[stream_id]
        laid = lay_out(one.stream)
        return self._heard(one, laid), laid.rate_hz

    def _sent(self, one: AssessedStream, laid: Laid) -> Samples:
        return self._kept("sent", one.id, lambda: sent_samples(one.stream, laid, self.buffers[one.stream.recording]))

    def _heard(self, one: AssessedStream, laid: Laid) -> Samples:
        return self._kept("heard", one.id, lambda: self._after_playout(one, laid))

    def _after_playout(self, one: AssessedStream, laid: Laid) -> Samples:
        sent, buffers = self._sent(one, laid), self.buffers[one.stream.recording]
        return heard_samples(
            one.stream, one.playback, sent, laid.rows, laid.position, laid.rate_hz, buffers, self._conceals_loss
        )

    def origin_ns(self, stream_id: str) -> int:
        """Capture time of a stream's first sample."""
        one = self._streams[stream_id]
        return lay_out(one.stream, one.figures.clock_skew_ppm).origin_ns

    def both(self, call: AssessedCall) -> tuple[Samples, int]:
        """Both directions as heard, on the capture's clock: left what the caller said, right what the callee said.

        Skew is taken out by dropping or repeating single quiet samples, as a receiver's playout does; the directions of
        one file are at the higher sampling rate of the two.
        """
        sides = [self._side(streams) for streams in (call.from_caller, call.from_callee)]
        parts = [part for side in sides for part in side]
        if not parts:
            raise MissingCodec(f"call {call.id}: no stream of it can be decoded")
        rate = max(part[1] for part in parts)
        origin = min(part[2] for part in parts)
        placed = [
            [(at_rate(samples, own, rate), round((at - origin) * rate / NS_PER_S)) for samples, own, at in side]
            for side in sides
        ]
        length = max(at + len(samples) for side in placed for samples, at in side if at < LONGEST_TIMELINE_S * rate)
        both = silence(min(length, LONGEST_TIMELINE_S * rate), 2)
        for column, side in enumerate(placed):
            for samples, at in side:
                both[at : at + len(samples), column] = samples[: max(0, len(both) - at)]
        return both, rate

    def _side(self, streams: Sequence[AssessedStream]) -> list[tuple[Samples, int, int]]:
        parts = []
        for one in streams:
            if silence_reason(one.stream):
                continue
            skew_ppm = one.figures.clock_skew_ppm
            laid = lay_out(one.stream, skew_ppm)
            parts.append((keep_time(self._heard(one, laid), skew_ppm), laid.rate_hz, laid.origin_ns))
        return parts


def keep_time(samples: Samples, skew_ppm: float) -> Samples:
    """The samples at the capture's pace: single quiet samples dropped where the sender is fast, repeated where slow.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    skew_ppm : float
        Sender's clock against the capture's, NaN where unknown. [ppm]

    Returns
    -------
    int16 array
        Off by at most one sample from the capture's time at any place, and by as much again where the quiet sample is
        looked for.
    """
    count = 0 if np.isnan(skew_ppm) else round(abs(skew_ppm) * 1e-6 * len(samples))
    if count == 0:
        return samples
    spacing = len(samples) / count
    reach = max(1, min(int(spacing / 2), 400))
    centres = ((np.arange(count) + 0.5) * spacing).astype(np.int64)
    quiet = [
        first + int(np.argmin(np.abs(samples[first : first + 2 * reach].astype(np.int32))))
        for first in np.maximum(centres - reach, 0).tolist()
    ]
    fast = skew_ppm > 0
    kept = silence(len(samples) - len(quiet) if fast else len(samples) + len(quiet))
    at = first = 0
    for place in quiet:
        piece = samples[first : place if fast else place + 1]
        kept[at : at + len(piece)] = piece
        at, first = at + len(piece), place + fast
    kept[at:] = samples[first:]
    return kept
