"""Starting: in good order, and without what a short run would wait for."""

import gc
import os
import signal
import subprocess
import sys
from collections.abc import Iterator

import pytest

from rtpaudit.cli.start import GARBAGE_AT_ONCE, settle, start


@pytest.fixture(autouse=True)
def _as_before() -> Iterator[None]:
    handler, threshold = signal.getsignal(signal.SIGTERM), gc.get_threshold()
    yield
    signal.signal(signal.SIGTERM, handler)
    gc.set_threshold(*threshold)
    gc.unfreeze()
    gc.enable()


def test_a_request_to_end_unwinds_so_that_nothing_half_written_stays() -> None:
    start()
    with pytest.raises(SystemExit) as ended:
        os.kill(os.getpid(), signal.SIGTERM)
    assert ended.value.code == 128 + signal.SIGTERM


def test_garbage_is_looked_for_once_the_modules_are_loaded() -> None:
    start()
    assert not gc.isenabled()
    settle()
    assert gc.isenabled()
    assert gc.get_threshold()[0] == GARBAGE_AT_ONCE


def test_a_process_that_is_not_ours_keeps_its_own_ways() -> None:
    before = gc.get_threshold()
    settle()
    assert gc.get_threshold() == before
    assert gc.get_freeze_count() == 0


def test_the_compiler_is_loaded_without_what_no_kernel_uses_and_still_compiles() -> None:
    code = """
import sys
from rtpaudit.kernels import kernel, load_without_extras
load_without_extras()
print(sorted({"scipy.linalg", "cffi"} & set(sys.modules)))

def _sum(x):
    total = 0.0
    for value in x:
        total += value
    return total

import numpy, numba
print(numba.njit(_sum)(numpy.arange(4.0)))
import scipy.linalg, cffi
print(scipy.linalg.norm(numpy.array([3.0, 4.0])))
"""
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert result.stdout.split("\n")[:3] == ["[]", "6.0", "5.0"]
