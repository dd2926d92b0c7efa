"""The same work on a Dask cluster: a real scheduler and workers on the loopback address, one killed while it works."""

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.journeys.test_nightly import begin
from tests.nightly.made import write_calls
from tests.nightly.runs import pending, rows

pytest.importorskip("distributed")
ROOT = Path(__file__).parents[2]
PATIENCE_S = 120.0


def service(place: Path, *arguments: str) -> subprocess.Popen[bytes]:
    log = open(place / "log", "ab")  # noqa: SIM115
    environment = os.environ | {"PYTHONPATH": str(ROOT), "DASK_DISTRIBUTED__COMM__TIMEOUTS__CONNECT": "60s"}
    with log:
        return subprocess.Popen([sys.executable, "-m", *arguments], cwd=place, stdout=log, stderr=log, env=environment)


@pytest.fixture
def cluster(tmp_path: Path) -> Iterator[tuple[str, list[subprocess.Popen[bytes]]]]:
    """Address of a scheduler, and its workers."""
    import json

    file = tmp_path / "scheduler.json"
    scheduler = ("distributed.cli.dask_scheduler", "--host", "127.0.0.1", "--port", "0", "--no-dashboard")
    services = [service(tmp_path, *scheduler, "--scheduler-file", str(file))]
    try:
        late = time.monotonic() + PATIENCE_S
        while not file.exists() or not file.read_text().endswith("}"):
            assert time.monotonic() < late, (tmp_path / "log").read_text()
            time.sleep(0.1)
        address = json.loads(file.read_text())["address"]
        worker = ("distributed.cli.dask_worker", address, "--nthreads", "1", "--no-nanny", "--no-dashboard")
        services += [service(tmp_path, *worker, "--host", "127.0.0.1", "--name", f"w{k}") for k in range(3)]
        yield address, services[1:]
    finally:
        for one in services:
            one.kill()
            one.wait()


def test_a_cluster_does_the_work_and_a_worker_may_be_lost(
    tmp_path: Path, cluster: tuple[str, list[subprocess.Popen[bytes]]]
) -> None:
    address, workers = cluster
    write_calls(tmp_path / "in", 60, 1.0)
    code = "from rtpaudit.nightly import batch; batch.COMMIT_CAPTURES = 4; batch.MOST_IN_PIECE = 2"
    arguments = ("in", "--store", "store", "--zone", "UTC", "--settle", "0", "--reports", "0", "--cluster", address)
    run = begin(tmp_path, *arguments, code=code)
    late = time.monotonic() + PATIENCE_S
    while not rows(tmp_path / "store", "calls"):
        assert time.monotonic() < late, (tmp_path / "log").read_text()
        time.sleep(0.05)
    done = len(rows(tmp_path / "store", "calls"))
    workers[0].send_signal(signal.SIGKILL)
    _, err = run.communicate(timeout=300)
    assert run.returncode == 0, err
    assert done < 60
    assert sorted(row["capture"] for row in rows(tmp_path / "store", "calls")) == [
        f"call-{k:05d}.pcap" for k in range(60)
    ]
    assert len(rows(tmp_path / "store", "captures")) == 60
    assert not pending(tmp_path / "store")


def test_a_cluster_that_is_not_there_is_one_line(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 1, 0.2)
    code = "from rtpaudit.nightly import cluster; cluster.CONNECT_S = 1"
    run = begin(tmp_path, "in", "--store", "s", "--zone", "UTC", "--settle", "0", "--cluster", "tcp://127.0.0.1:9",
                code=code)  # fmt: skip
    _, err = run.communicate(timeout=120)
    assert run.returncode == 2
    assert err.count("\n") == 1
    assert "no scheduler answers there" in err
