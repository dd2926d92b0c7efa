"""One pass over the samples of a stream, from which levels, activity, clipping, silence and steadiness are read.

Conventions of this bench: samples are int16, 0 dBov is a full-scale square wave (mean square of 32768²). A block is
10 ms, a window 2 s, both counted from the first sample. A passage that no packet brought is left out as long as the
hangover of P.56 would bridge it, and counts as silence from there on: a short one is a loss, of which nothing is
known; a long one is a pause or an outage, and silent for the listener.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel

Samples = NDArray[np.int16]
Mask = NDArray[np.bool_]

BLOCKS_PER_S = 100
WINDOW_S = 2
BLOCKS_PER_WINDOW = WINDOW_S * BLOCKS_PER_S

TIME_CONSTANT_S = 0.03
"""of the two-stage envelope. ITU-T P.56, method B (through G.191)"""
HANGOVER_S = 0.2
"""ITU-T P.56, method B (through G.191)"""
THRESHOLDS = 15
"""powers of two from 2^-15 to 1/2 of full scale. ITU-T P.56, method B (through G.191)"""

EXTREMES = {"PCMU": (-32124, 32124), "PCMA": (-32256, 32256)}
"""smallest and largest sample that the code can say. ITU-T G.711 (11/1988), Tables 1 and 2"""
LINEAR_EXTREMES = (-32767, 32767)
"""of every other encoding; a decoder that saturates may stop one short of -32768"""
CLIPPED_RUN = 2
"""neighbours at one extreme that make a clipped passage; one alone may be a true peak (common practice)"""


@dataclass(frozen=True, slots=True)
class Scan:
    """Sums over blocks and windows of one stream."""

    sampling_rate_hz: int
    samples: int
    block_samples: int
    received: NDArray[np.int32]
    """samples that packets brought. Shape (blocks,)"""
    total: NDArray[np.int32]
    """sum of these. Shape (blocks,)"""
    energy: NDArray[np.float64]
    """sum of their squares. Shape (blocks,)"""
    peak: NDArray[np.int32]
    """largest magnitude. Shape (blocks,)"""
    reached: NDArray[np.uint8]
    """number of P.56 thresholds active at the highest moment of the block, hangover included. Shape (blocks,)"""
    clipped: NDArray[np.int32]
    """samples in runs at the extremes. Shape (blocks,)"""
    active: NDArray[np.int64]
    """samples during which exactly 0, 1, … 15 thresholds were active. Shape (windows, 16)"""
    clipped_runs: int
    longest_clipped_run: int

    @property
    def dc_offset(self) -> float:
        """Mean of the received samples, 0 where there are none. [1/32768 of full scale]"""
        return float(self.total.sum(dtype=np.int64)) / max(1, int(self.received.sum()))

    def power(self) -> NDArray[np.float64]:
        """Mean square of each block about its own mean; NaN where nothing was received. Shape (blocks,).

        So an offset has no power; noise loses 1 %, a hum of 50 Hz 2 dB.
        """
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = self.total / self.received
            return np.asarray(np.maximum(self.energy / self.received - mean * mean, 0.0))


def scan(samples: Samples, sampling_rate_hz: int, received: Mask | None = None, encoding: str = "") -> Scan:
    """Sums over blocks and windows, in one pass.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        A stream's timeline.
    sampling_rate_hz : int
        [Hz]
    received : bool array, shape (n,), optional
        False where no packet brought the sample. All were received where it is left out.
    encoding : str
        IANA media subtype; it decides where the extremes of the code are.

    Returns
    -------
    Scan

    Raises
    ------
    ValueError
        If the mask has another shape than the samples, or there are fewer than 1000 samples a second.
    """
    if sampling_rate_hz < 1000:
        raise ValueError(f"{sampling_rate_hz} Hz is no sampling rate of speech: were kHz given?")
    if received is not None and received.shape != samples.shape:
        raise ValueError(f"the mask has shape {received.shape}, the samples have {samples.shape}")
    block = sampling_rate_hz // BLOCKS_PER_S
    blocks = -(-len(samples) // block)
    per_block = np.zeros((4, blocks), np.int32)
    energy, reached = np.zeros(blocks), np.zeros(blocks, np.uint8)
    active = np.zeros((-(-blocks // BLOCKS_PER_WINDOW), THRESHOLDS + 1), np.int64)
    runs = np.zeros(2, np.int64)
    low, high = EXTREMES.get(encoding.upper(), LINEAR_EXTREMES)
    _scan(
        np.ascontiguousarray(samples, np.int16),
        np.zeros(0, np.bool_) if received is None else np.ascontiguousarray(received, np.bool_),
        block,
        round(HANGOVER_S * sampling_rate_hz),
        math.exp(-1.0 / (TIME_CONSTANT_S * sampling_rate_hz)),
        low,
        high,
        per_block,
        energy,
        reached,
        active,
        runs,
    )
    return Scan(
        sampling_rate_hz,
        len(samples),
        block,
        received=per_block[0],
        total=per_block[1],
        energy=energy,
        peak=per_block[2],
        reached=reached,
        clipped=per_block[3],
        active=active,
        clipped_runs=int(runs[0]),
        longest_clipped_run=int(runs[1]),
    )


@kernel
def _scan(
    samples: Samples,
    received: Mask,
    block: int,
    hangover: int,
    g: float,
    low: int,
    high: int,
    per_block: NDArray[np.int32],
    energy: NDArray[np.float64],
    reached: NDArray[np.uint8],
    active: NDArray[np.int64],
    runs: NDArray[np.int64],
) -> None:
    """ITU-T P.56, method B, with its symbols p, q and g; the sums of ``Scan`` beside it.

    Thresholds are nested, so one number says which are active: how many lie at or below the envelope (``now``), or did
    within the hangover (``most``). ``last[k]`` is when the envelope was last exactly above k of them.
    """
    p, q, scale = 0.0, 0.0, (1.0 - g) / 32768.0
    now, most, floor, ceiling = 0, 0, -1.0, 2.0**-THRESHOLDS
    last = np.full(THRESHOLDS + 1, -hangover - 1, np.int64)
    clock, missing, at_high, at_low = 0, 0, 0, 0
    masked = len(received) > 0
    for b in range(len(energy)):
        first, end = b * block, min((b + 1) * block, len(samples))
        there, total, squares, top, bottom = np.int64(0), np.int64(0), np.int64(0), np.int64(0), np.int64(0)
        for i in range(first, end):
            x = np.int64(samples[i])
            if masked:
                x *= received[i]
                there += received[i]
            total += x
            squares += x * x
            top = max(top, x)
            bottom = min(bottom, x)
        if top >= high or bottom <= low:
            for i in range(first, end):
                at_high = at_high + 1 if samples[i] >= high else 0
                at_low = at_low + 1 if samples[i] <= low else 0
                run = max(at_high, at_low)
                if run == CLIPPED_RUN:
                    runs[0] += 1
                per_block[3, b] += CLIPPED_RUN if run == CLIPPED_RUN else 1 if run > CLIPPED_RUN else 0
                runs[1] = max(runs[1], run)
        else:
            at_high, at_low = 0, 0
        window, peak = b // BLOCKS_PER_WINDOW, 0
        for i in range(first, end):
            if masked:
                missing = 0 if received[i] else missing + 1
                if 0 < missing <= hangover:
                    continue
            p = g * p + scale * abs(np.float64(samples[i]))
            q = g * q + (1.0 - g) * p
            clock += 1
            while q >= ceiling and now < THRESHOLDS:
                now, floor, ceiling = now + 1, ceiling, ceiling * 2.0
            while q < floor:
                now, ceiling = now - 1, floor
                floor = floor * 0.5 if now else -1.0
            if now >= most:
                most = now
            else:
                while most > now and clock - last[most] > hangover:
                    most -= 1
            last[now] = clock
            active[window, most] += 1
            peak = max(peak, most)
        per_block[0, b] = there if masked else end - first
        per_block[1, b] = total
        per_block[2, b] = max(top, -bottom)
        energy[b] = squares
        reached[b] = peak
