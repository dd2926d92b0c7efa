"""Frames a second through the decode room, and seconds of compiling: ``python -m tests.benchmarks.decoding``.

Nothing here is asserted. The frames lie in memory, as those of a file in the page cache do.
"""

import os
import subprocess
import sys
import tempfile
import time

import numpy as np

from rtpaudit.capture.frames import Frames, Interface
from rtpaudit.decode import Decoder
from tests.decode.specimens import SPECIMENS

FRAMES, FLOWS, BATCH = 1_800_000, 200, 262_144
RECORD_HEADER = 16
PLAIN = "Ethernet and IPv4"

FIRST_RUN = """
import time
from tests.benchmarks.decoding import PLAIN, batches
from rtpaudit.decode import Decoder
decoder = Decoder()
begun = time.perf_counter()
decoder.decode(batches(PLAIN, 10)[0], "made.pcap")
print(f"{time.perf_counter() - begun:.2f}")
"""


def batches(name: str, count: int) -> list[Frames]:
    """The same frame ``count`` times with record headers between, in batches; plain ones make ``FLOWS`` flows."""
    link_type, frame = SPECIMENS[name]
    rows = np.zeros((count, RECORD_HEADER + len(frame)), np.uint8)
    rows[:, RECORD_HEADER:] = np.frombuffer(frame, np.uint8)
    if name == PLAIN:
        rows[:, RECORD_HEADER + 35] = np.arange(count) % FLOWS  # low octet of the source port
    start = np.arange(count, dtype=np.int64) * rows.shape[1] + RECORD_HEADER
    captured = np.full(count, len(frame), np.int32)
    time_ns, interface = np.arange(count, dtype=np.int64) * 1000, np.zeros(count, np.uint16)
    parts = [slice(first, first + BATCH) for first in range(0, count, BATCH)]
    return [
        Frames(
            rows.reshape(-1),
            start[part],
            captured[part],
            captured[part],
            time_ns[part],
            interface[part],
            (Interface(link_type),),
            part.start + 1,
        )
        for part in parts
    ]


def frames_a_second(name: str, count: int) -> float:
    """The best of three."""
    made, taken = batches(name, count), []
    for _ in range(3):
        decoder = Decoder()
        begun = time.perf_counter()
        for frames in made:
            decoder.decode(frames, "made.pcap")
        taken.append(time.perf_counter() - begun)
    return count / min(taken)


def first_run_s(cache: str) -> str:
    """Seconds of a process's first batch with its kernels cached in this folder."""
    environment = os.environ | {"NUMBA_CACHE_DIR": cache}
    run = subprocess.run([sys.executable, "-c", FIRST_RUN], env=environment, check=True, capture_output=True, text=True)
    return run.stdout.strip()


def main() -> None:
    """Print compile time and speeds."""
    with tempfile.TemporaryDirectory() as cache:
        print(f"first batch, kernels to be compiled  {first_run_s(cache):>8} s")
        print(f"first batch, kernels cached          {first_run_s(cache):>8} s")
    for name in SPECIMENS:
        slow = name in ("radiotap", "an EtherType for backbone bridges")
        count = FRAMES if name == PLAIN else 5_000 if slow else BATCH
        print(f"{name:<46} {frames_a_second(name, count) / 1e6:8.3f} M frames/s")


if __name__ == "__main__":
    main()
