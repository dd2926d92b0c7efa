"""Ratios of the nightly audit: ``python -m tests.benchmarks.nightly [CAPTURES [SECONDS]]``; ``… years``: false alarms.

Nothing here is asserted: seconds depend on the machine, the ratios much less. Captures hold one 3-minute two-way G.711
call each, 4 MB; they are made first and count for nothing.
"""

import os
import resource
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

import numpy as np

from tests.nightly.made import write_calls
from tests.nightly.test_trends import alarms
from tests.nightly.years import night

PACKETS_A_SECOND = 100
"""of both ways"""


def read_all(folder: Path) -> float:
    """The baseline: the time to read every octet once. [s]"""
    begun = time.perf_counter()
    for path in folder.iterdir():
        with open(path, "rb") as file:
            while file.read(1 << 20):
                pass
    return time.perf_counter() - begun


def peak_anonymous(process: subprocess.Popen[bytes]) -> tuple[int, int]:
    """Highest anonymous memory of a process and of the largest of its children while it runs, sampled. [octets]"""
    highest = [0, 0]

    def watch() -> None:
        while process.poll() is None:
            children = Path(f"/proc/{process.pid}/task/{process.pid}/children")
            pids = children.read_text().split() if children.exists() else []
            highest[0] = max(highest[0], _anonymous(str(process.pid)))
            highest[1] = max([highest[1], *(_anonymous(pid) for pid in pids)])
            time.sleep(0.05)

    watcher = threading.Thread(target=watch)
    watcher.start()
    process.wait()
    watcher.join()
    return highest[0], highest[1]


def _anonymous(pid: str) -> int:
    try:
        lines = Path(f"/proc/{pid}/status").read_text().splitlines()
    except OSError:
        return 0
    return next((int(line.split()[1]) * 1024 for line in lines if line.startswith("RssAnon")), 0)


def nightly(place: Path, source: Path, name: str, *more: str) -> tuple[float, float, int, int]:
    """Seconds on the clock and of all cores, and peak memory, of one run, figures only, without reports."""
    begun, used = time.perf_counter(), _children_s()
    words = [sys.executable, "-m", "rtpaudit", "nightly", str(source), "--store", str(place / name), "--zone", "UTC"]
    given = ["--settle", "0", "--reports", "0", "--quiet", *more]
    process = subprocess.Popen([*words, *given], env=os.environ | {"XDG_STATE_HOME": str(place / "state")})
    main, worker = peak_anonymous(process)
    if process.returncode:
        raise SystemExit(f"the run ended with {process.returncode}")
    return time.perf_counter() - begun, _children_s() - used, main, worker


def _children_s() -> float:
    """What all processes that were waited for have used of the cores. [s]"""
    usage = resource.getrusage(resource.RUSAGE_CHILDREN)
    return usage.ru_utime + usage.ru_stime


def speed(most: int, seconds: float) -> None:
    """Captures a second, cost a capture from few to many, memory, and what a run without anything new takes."""
    with tempfile.TemporaryDirectory() as folder:
        place = Path(folder)
        made = 0
        for count in [*(one for one in (100, 1000) if one < most), most]:
            write_calls(place / "in", count - made, seconds, first=made, loss=0.002)
            made = count
            base = read_all(place / "in")
            taken, used, main, worker = nightly(place, place / "in", f"store-{count}")
            pace = (
                f"{count / taken:6.1f} captures/s, {count * PACKETS_A_SECOND * seconds / taken / 1e6:.2f} M packets/s"
            )
            print(f"{count:6} captures  {taken:7.1f} s  {pace}, {taken / base:.0f} x reading them")
            print(f"{'':15}  {used:7.1f} s  of cores, {1e3 * used / count:.1f} ms a capture")
            print(f"{'':15}  {main / 1e6:7.0f} MB in the run itself, {worker / 1e6:.0f} MB in a worker, at most")
            again, *_ = nightly(place, place / "in", f"store-{count}")
            print(f"{'':15}  {again:7.1f} s  with nothing new")
            kept = sum(path.stat().st_size for path in (place / f"store-{count}").rglob("*.parquet"))
            print(f"{'':15}  {kept / count / 1e3:7.1f} kB a capture in the store")


def years(count: int = 10) -> None:
    """False alarms in years of unchanged nights, one line each."""
    for seed in range(count):
        draw = np.random.default_rng(seed)
        false = alarms([night(k, draw, routes=5) for k in range(365)])
        print(f"year {seed}: {len(false)} false alarms on {len({k for k, _ in false})} nights")


if __name__ == "__main__":
    if sys.argv[1:] == ["years"]:
        years()
    else:
        speed(int((sys.argv[1:2] or ["1000"])[0]), float((sys.argv[2:3] or ["180"])[0]))
