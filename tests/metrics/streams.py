"""Streams for the tests of this bench: columns in order of arrival, by hand or by seed."""

from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np
from hypothesis import strategies as st

STARTED_NS = 1_700_000_000_123_456_789
MS = 1_000_000


@dataclass(frozen=True)
class Columns:
    time_ns: np.ndarray
    extended: np.ndarray
    segment: np.ndarray
    duplicate: np.ndarray
    media_ticks: np.ndarray
    audio: np.ndarray
    clock_rate_hz: np.ndarray

    def lists(self) -> SimpleNamespace:
        """The same as plain Python lists, for the slow twins."""
        return SimpleNamespace(**{name: getattr(self, name).tolist() for name in self.__dataclass_fields__})

    def rows(self, chosen) -> "Columns":
        return Columns(**{name: getattr(self, name)[chosen] for name in self.__dataclass_fields__})


def by_numbers(numbers, delays_ms=0.0, packet_ms=20, clock_rate_hz=8000) -> Columns:
    """One packet per number, in that order of arrival; a number that came before is a duplicate."""
    numbers = np.asarray(numbers, np.int64)
    n = len(numbers)
    media_ms = (numbers - numbers.min()) * packet_ms
    first = np.zeros(n, bool)
    first[np.unique(numbers, return_index=True)[1]] = True
    return Columns(
        time_ns=STARTED_NS + np.rint((media_ms + np.broadcast_to(delays_ms, n)) * MS).astype(np.int64),
        extended=numbers,
        segment=np.zeros(n, np.int32),
        duplicate=~first,
        media_ticks=(media_ms * clock_rate_hz // 1000).astype(np.int64),
        audio=np.ones(n, bool),
        clock_rate_hz=np.full(n, clock_rate_hz, np.int32),
    )


def paced(seconds, skew_ppm, delay_ms, packet_ms=20, clock_rate_hz=8000) -> Columns:
    """A stream without loss from a sender whose clock is so fast, each packet so long on the way."""
    n = round(seconds * 1000 / packet_ms)
    media_ms = np.arange(n) * float(packet_ms)
    whole = by_numbers(np.arange(n), 0.0, packet_ms, clock_rate_hz)
    time_ns = STARTED_NS + np.rint((media_ms / (1 + skew_ppm * 1e-6) + delay_ms) * MS).astype(np.int64)
    return replace(whole, time_ns=time_ns).rows(np.argsort(time_ns, kind="stable"))


@st.composite
def streams(draw, most_packets=120) -> Columns:
    """Loss in bursts, copies, late packets, several segments, events, two clock rates, and numbers over the wraps."""
    chance = np.random.default_rng(draw(st.integers(0, 2**32)))
    parts, clock_ms, ticks = [], 0.0, int(chance.integers(0, 2**33))
    rates = draw(st.sampled_from([(8000,), (48000,), (8000, 16000)]))
    for segment in range(draw(st.integers(1, 3))):
        n = draw(st.integers(1, most_packets))
        lost = chance.random(n) < draw(st.sampled_from([0.0, 0.02, 0.3]))
        for start in chance.integers(0, n, draw(st.integers(0, 2))):
            lost[start : start + chance.integers(1, 25)] = True
        lost[chance.integers(0, n)] = False
        number = np.arange(n)
        rate = np.repeat(rates, -(-n // len(rates)))[:n]
        pause = np.cumsum(chance.random(n) < 0.03) * 700.0
        media_ms = number * 20.0 + pause
        sent = number[~lost]
        spread = draw(st.sampled_from([0.0, 3.0, 40.0]))
        parts.append(
            np.stack(
                [
                    clock_ms + media_ms[sent] + chance.exponential(spread, len(sent)),
                    sent + int(chance.integers(60_000, 66_000)),
                    np.full(len(sent), segment),
                    ticks + np.cumsum(np.diff(media_ms, prepend=0.0) * rate / 1000)[sent],
                    chance.random(len(sent)) >= 0.1,
                    rate[sent],
                ]
            )
        )
        clock_ms += media_ms[-1] + 30.0
        ticks += int(chance.integers(0, 2**32))
    first = np.concatenate(parts, axis=1)
    again = first[:, chance.random(first.shape[1]) < draw(st.sampled_from([0.0, 0.1]))].copy()
    again[0] += chance.exponential(30.0, again.shape[1]) + 0.001
    columns = np.concatenate([first, again], axis=1)
    copy = np.arange(columns.shape[1]) >= first.shape[1]
    order = np.argsort(columns[0], kind="stable")
    columns, copy = columns[:, order], copy[order]
    return Columns(
        time_ns=STARTED_NS + np.rint(columns[0] * MS).astype(np.int64),
        extended=columns[1].astype(np.int64),
        segment=columns[2].astype(np.int32),
        duplicate=copy,
        media_ticks=columns[3].astype(np.int64),
        audio=columns[4].astype(bool),
        clock_rate_hz=columns[5].astype(np.int32),
    )
