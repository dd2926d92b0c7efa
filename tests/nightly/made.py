"""Captures of one two-way G.711 call each, made whole columns at a time, which takes less time than auditing them."""

from pathlib import Path

import numpy as np

from tests.craft import ethernet, ipv4, pcap, rtp, udp

START_NS = 1_772_391_600_000_000_000
"""2026-03-01 19:00:00 UTC, so in the night of 2026-03-01"""

PACKETS_A_SECOND = 50
_RECORD = 16 + 14 + 20 + 8 + 12 + 160


def call_octets(
    seed: int,
    seconds: float = 4.0,
    *,
    start_ns: int = START_NS,
    loss: float = 0.0,
    jitter_ms: float = 0.1,
    caller: str = "192.0.2.10",
    callee: str = "198.51.100.20",
    one_way: bool = False,
) -> bytes:
    """A pcap of one call; the same arguments give the same octets. ``loss`` is a probability, both ways."""
    draw = np.random.default_rng(seed)
    sides = [_stream(draw, seconds, start_ns, jitter_ms, (caller, 16_384), (callee, 30_000), loss)]
    if not one_way:
        sides.append(_stream(draw, seconds, start_ns + 3_000_000, jitter_ms, (callee, 30_000), (caller, 16_384), loss))
    times, rows = (np.concatenate(parts) for parts in zip(*sides, strict=True))
    return pcap([]) + rows[np.argsort(times, kind="stable")].tobytes()


def write_calls(folder: Path, count: int, seconds: float = 4.0, first: int = 0, **more: object) -> list[Path]:
    """Captures of one call each, a minute apart; the seed is the number of the call."""
    folder.mkdir(parents=True, exist_ok=True)
    paths = []
    for number in range(first, first + count):
        paths.append(folder / f"call-{number:05d}.pcap")
        given = {"start_ns": START_NS + number % 600 * 60_000_000_000} | more
        paths[-1].write_bytes(call_octets(number, seconds, **given))  # type: ignore[arg-type]
    return paths


def _stream(
    draw: np.random.Generator,
    seconds: float,
    start_ns: int,
    jitter_ms: float,
    source: tuple[str, int],
    destination: tuple[str, int],
    loss: float,
) -> tuple[np.ndarray, np.ndarray]:
    """Arrival times and pcap records of one stream."""
    count = int(seconds * PACKETS_A_SECOND)
    k = np.arange(count)
    head = _record(int(draw.integers(1, 2**32)), source, destination)
    rows = np.broadcast_to(head, (count, _RECORD)).copy()
    late = np.abs(draw.normal(0.0, jitter_ms * 1e6, count)).astype(np.int64)
    times = start_ns + k * 20_000_000 + late
    _put(rows, 0, times // 1_000_000_000, "<u4")
    _put(rows, 4, times % 1_000_000_000 // 1000, "<u4")
    _put(rows, 60, (int(draw.integers(0, 65536)) + k) & 0xFFFF, ">u2")
    _put(rows, 62, (int(draw.integers(0, 2**32)) + 160 * k) & 0xFFFFFFFF, ">u4")
    rows[:, 70:] = draw.integers(0, 256, (1, 160), np.uint8)
    kept = draw.random(count) >= loss
    kept[[0, -1]] = True
    return times[kept], rows[kept]


def _record(ssrc: int, source: tuple[str, int], destination: tuple[str, int]) -> np.ndarray:
    packet = udp(rtp(bytes(160), ssrc=ssrc), source[1], destination[1])
    frame = ethernet(ipv4(packet, source[0], destination[0], dscp=46))
    return np.frombuffer(pcap([frame])[24:], np.uint8)


def _put(rows: np.ndarray, at: int, values: np.ndarray, dtype: str) -> None:
    octets = values.astype(dtype)[:, None].view(np.uint8)
    rows[:, at : at + octets.shape[1]] = octets
