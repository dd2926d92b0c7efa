"""The E-model over many streams at once: what each listener's rating is, and what limits it."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.playback import Playback
from rtpaudit.assess.results import BufferCurve
from rtpaudit.emodel.budget import Budget, budget
from rtpaudit.emodel.g107 import Parts, mos_from_r, rating
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.emodel.g113 import impairment, reason_for_no_rating
from rtpaudit.emodel.look_ahead import look_ahead_ms
from rtpaudit.emodel.notes import rating_note
from rtpaudit.media.streams import Stream
from rtpaudit.planning import PARAMETERS
from rtpaudit.profile import Profile

Values = NDArray[np.float64]

NARROWBAND_HZ = 8000
SEVERAL_BIT_RATES = ("G723",)
"""encodings whose packets tell which of several rows of G.113 holds"""
NEAR_BEST = 0.5
"""points of R that nobody hears: of buffers that near the best the shortest is named"""
ENCRYPTED = "the payload is encrypted: rated by its packets alone"


@dataclass(frozen=True, slots=True)
class Path:
    """What the E-model asks of one stream besides its encoding."""

    loss_pct: float
    """lost and discarded, of those expected [%]"""
    burst_ratio: float
    network_ms: float
    """one-way delay of the network, NaN where it has to be assumed [ms]"""
    network_basis: str
    """``rtcp`` or ``given``, "" where it has to be assumed"""
    playout_ms: float
    """delay in the playout buffer [ms]"""
    telr_db: float = float("nan")
    """talker echo loudness rating, NaN where no echo was found [dB]"""


@dataclass(frozen=True, slots=True)
class CodecColumns:
    """Ie and Bpl of many streams, NaN where there are none. Shape (streams,)."""

    Ie: Values
    Bpl: Values
    notes: list[str]


@dataclass(frozen=True, slots=True)
class Rated:
    """Ratings of many streams. Arrays of shape (streams,)."""

    codec: CodecColumns
    telr_db: Values
    fixed_ms: Values
    """mouth-to-ear delay without the playout buffer [ms]"""
    delay_ms: Values
    """mouth-to-ear delay [ms]"""
    delay_basis: list[str]
    parts: Parts
    """NaN throughout where the encoding has no values"""
    low: Values
    high: Values
    mos: Values
    bands: list[str]
    notes: list[str]


def codec_columns(streams: Sequence[Stream], profile: Profile) -> CodecColumns:
    """Ie and Bpl of each stream's encoding, with the reason where it has none."""
    Ie, Bpl = np.full(len(streams), np.nan), np.full(len(streams), np.nan)
    notes = [""] * len(streams)
    for k, stream in enumerate(streams):
        row = impairment(
            stream.encoding,
            conceals_loss=profile.conceals_loss,
            kbit_s=_bit_rate(stream) if stream.encoding in SEVERAL_BIT_RATES else None,
            sampling_rate_hz=stream.sampling_rate_hz or NARROWBAND_HZ,
            own=profile.encodings,
        )
        if row is None:
            notes[k] = reason_for_no_rating(stream.encoding, stream.sampling_rate_hz or NARROWBAND_HZ)
            continue
        Ie[k], Bpl[k], notes[k] = row.Ie, row.Bpl or PARAMETERS["Bpl"].default, row.note
    return CodecColumns(Ie, Bpl, notes)


def rate(streams: Sequence[Stream], paths: Sequence[Path], profile: Profile) -> Rated:
    """Rate every stream as its listener would, by ITU-T G.107 with Ta = T = mouth-to-ear delay and Tr = 2 T."""
    codec = codec_columns(streams, profile)
    network = np.array([path.network_ms for path in paths], np.float64)
    assumed = np.isnan(network)
    coding_ms = np.nan_to_num([one.packet_time_ms + look_ahead_ms(one.encoding) for one in streams])
    playout_ms = np.array([path.playout_ms for path in paths], np.float64)
    loss = np.array([path.loss_pct for path in paths], np.float64)
    burst = np.array([path.burst_ratio for path in paths], np.float64)
    telr = np.nan_to_num(np.array([path.telr_db for path in paths], np.float64), nan=PARAMETERS["TELR"].default)

    def rated(assumed_ms: float) -> Parts:
        delay = np.where(assumed, assumed_ms, network) + coding_ms + playout_ms
        return rating(
            profile.planning,
            Ta=delay,
            Ie=codec.Ie,
            Bpl=codec.Bpl,
            Ppl=loss,
            BurstR=burst,
            TELR=telr,
        )

    parts = rated(profile.network.assumed_ms)
    fixed_ms = np.where(assumed, profile.network.assumed_ms, network) + coding_ms
    delay_ms = fixed_ms + playout_ms
    notes = [
        _note(stream, note, path, float(delay))
        for stream, note, path, delay in zip(streams, codec.notes, paths, delay_ms, strict=True)
    ]
    bands = [str(band) if not np.isnan(R) else "" for band, R in zip(quality_band(parts.R), parts.R, strict=True)]
    return Rated(
        codec,
        telr,
        fixed_ms,
        delay_ms,
        [path.network_basis or "assumed" for path in paths],
        parts,
        np.where(assumed, rated(profile.network.high_ms).R, parts.R),
        np.where(assumed, rated(profile.network.low_ms).R, parts.R),
        mos_from_r(parts.R),
        bands,
        notes,
    )


def rate_windows(loss_pct: Values, stream: NDArray[np.int64], rated: Rated, profile: Profile) -> Values:
    """R of each window with BurstR 1; ``stream`` is the row of the stream that each window belongs to."""
    known = ~np.isnan(loss_pct)
    R = np.full(len(loss_pct), np.nan)
    of = stream[known]
    R[known] = rating(
        profile.planning,
        Ta=rated.delay_ms[of],
        Ie=rated.codec.Ie[of],
        Bpl=rated.codec.Bpl[of],
        Ppl=loss_pct[known],
        BurstR=1.0,
        TELR=rated.telr_db[of],
    ).R
    return R


def budgets(rated: Rated, lost: Sequence[int], discarded: Sequence[int]) -> list[Budget]:
    """The way from Ro to R of each stream, by its lost and discarded packets."""
    whole = budget(rated.parts, lost, discarded)
    columns = {name: getattr(whole, name) for name in Budget.__dataclass_fields__}
    return [Budget(**{name: column[k] for name, column in columns.items()}) for k in range(len(lost))]


def buffer_curve(playback: Playback, rated: Rated, k: int, profile: Profile) -> BufferCurve:
    """R of stream ``k`` at fixed playout buffers of other delays."""
    tried = playback.other_buffers()
    buffered = np.where(np.isnan(tried.mean_delay_ms), tried.delay_ms, tried.mean_delay_ms)
    R = rating(
        profile.planning,
        Ta=rated.fixed_ms[k] + buffered,
        Ie=rated.codec.Ie[k],
        Bpl=rated.codec.Bpl[k],
        Ppl=tried.lost_pct,
        BurstR=tried.burst_ratio,
        TELR=rated.telr_db[k],
    ).R
    if np.isnan(R).any():
        return BufferCurve(tried.delay_ms, tried.discard_pct, R, float("nan"), float("nan"))
    best = int(np.argmax(R >= R.max() - NEAR_BEST))
    return BufferCurve(tried.delay_ms, tried.discard_pct, R, float(tried.delay_ms[best]), float(R[best]))


def _bit_rate(stream: Stream) -> float:
    """Bit rate of most packets, to a tenth. [kbit/s]"""
    octets = float(np.median(stream.packets.length))
    return round(octets * 8 / stream.packet_time_ms, 1) if stream.packet_time_ms > 0 else float("nan")


def _note(stream: Stream, codec_note: str, path: Path, delay_ms: float) -> str:
    further = "; ".join(note for note in (codec_note, ENCRYPTED if stream.encrypted else "") if note)
    return rating_note(further=further, Ppl=path.loss_pct, Ta=delay_ms, BurstR=path.burst_ratio)
