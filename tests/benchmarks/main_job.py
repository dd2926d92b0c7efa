"""Ratios of the main job against baselines of the same run: ``python -m tests.benchmarks.main_job [CALLS]``.

Nothing here is asserted: seconds depend on the machine, the ratios much less.
"""

import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from pathlib import Path

import dpkt
import numpy as np

import rtpaudit
from tests.benchmarks.lines import make_capture

DEMO = Path(rtpaudit.__file__).parent / "demo" / "demo.pcap"


def unpack_headers(path: Path) -> int:
    """The baseline: dpkt unpacks Ethernet, IP, UDP and RTP headers and counts."""
    count = 0
    with open(path, "rb") as file:
        for _, octets in dpkt.pcap.Reader(file):
            packet = dpkt.rtp.RTP(dpkt.ethernet.Ethernet(octets).data.data.data)
            count += packet.version == 2
    return count


def read_and_write(path: Path, folder: Path, octets: int) -> None:
    """The other baseline: read the capture once and write as many octets as the WAV files hold."""
    with open(path, "rb") as file:
        while file.read(1 << 20):
            pass
    block = bytes(np.random.default_rng(1).integers(0, 256, 1 << 20, np.uint8))
    with open(folder / "baseline", "wb") as file:
        for begin in range(0, octets, len(block)):
            file.write(block[: octets - begin])


def seconds(job: Callable[[], object], times: int = 3) -> float:
    """Median of several runs. [s]"""
    taken = []
    for _ in range(times):
        begun = time.perf_counter()
        job()
        taken.append(time.perf_counter() - begun)
    return float(np.median(taken))


def peak_anonymous_octets(job: Callable[[], object]) -> int:
    """Highest anonymous memory of this process while ``job`` runs, sampled every 5 ms."""
    highest, done = 0, threading.Event()

    def watch() -> None:
        nonlocal highest
        while not done.wait(0.005):
            for line in Path("/proc/self/status").read_text().splitlines():
                if line.startswith("RssAnon"):
                    highest = max(highest, int(line.split()[1]) * 1024)

    watcher = threading.Thread(target=watch)
    watcher.start()
    try:
        job()
    finally:
        done.set()
        watcher.join()
    return highest


def command(*words: str) -> Callable[[], object]:
    """A command that runs as a process of its own."""
    return lambda: subprocess.run(words, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)


def main(calls: int) -> None:
    """Make the capture, run everything, print ratios."""
    with tempfile.TemporaryDirectory() as place:
        folder, path = Path(place), Path(place) / "calls.pcap"
        packets = make_capture(path, calls)
        size = path.stat().st_size
        print(f"{packets:,} packets, {size / 1e6:.0f} MB")

        def figures(capture: Path = path) -> object:
            return rtpaudit.audit(capture, sound=False, findings=False).tables

        rtpaudit.audit(DEMO).tables  # noqa: B018  loads kernels and libraries
        ours = seconds(figures)
        theirs = seconds(lambda: unpack_headers(path), times=1)
        pace = f"{packets / ours / 1e6:.2f} M packets/s, {theirs / ours:.0f} times as fast as dpkt unpacks headers"
        print(f"figures only      {ours:7.2f} s  {pace}")
        signalled = folder / "signalled.pcap"
        make_capture(signalled, calls, dialogs=True)
        cost = 100.0 * (seconds(lambda: figures(signalled)) / ours - 1.0)
        print(f"a dialog a call   {cost:+7.1f} %  of the time")
        signalled.unlink()
        memory = peak_anonymous_octets(figures)
        print(f"anonymous memory  {memory / 1e6:7.0f} MB  {(memory - 400e6) / packets:.0f} octets a packet over 400 MB")

        for what, whole_job in (("with WAV", False), ("whole triage", True)):

            def write(judged: bool = whole_job) -> None:
                rtpaudit.audit(path, sound=judged, findings=judged).write(folder / "report")

            whole = seconds(write, times=1)
            octets = sum(one.stat().st_size for one in (folder / "report" / "audio").iterdir())
            base = seconds(lambda octets=octets: read_and_write(path, folder, octets))
            print(f"{what:18}{whole:7.2f} s  {whole / base:.1f} x reading it and writing {octets / 1e6:.0f} MB")

        python = sys.executable
        bare = seconds(command(python, "-c", "import pandas, numba"), times=5)
        shown = seconds(command(python, "-m", "rtpaudit", "--help"), times=5)
        demo = seconds(command(python, "-m", "rtpaudit", "demo", "--out", str(folder / "demo-audit")), times=5)
        print(f"--help            {shown:7.2f} s")
        print(f"demo              {demo:7.2f} s  {demo / bare:.1f} x importing pandas and numba")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 100)
