"""Whole commands as a user runs them: a process of its own, in an empty directory."""

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"

Command = Callable[..., subprocess.CompletedProcess[str]]


@pytest.fixture(scope="module")
def place(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A directory in which the commands of one journey run, one after the other."""
    return tmp_path_factory.mktemp("place")


@pytest.fixture(scope="module")
def command(place: Path) -> Command:
    """Run ``rtpaudit`` and hand back status, output and errors."""

    def run(*arguments: object, stdin: bytes | None = None) -> subprocess.CompletedProcess[str]:
        result = subprocess.run(
            [sys.executable, "-m", "rtpaudit", *map(str, arguments)],
            input=stdin,
            capture_output=True,
            cwd=place,
            env=os.environ | {"PYTHONPATH": str(CAPTURES.parents[1])},
            check=False,
        )
        return subprocess.CompletedProcess(
            result.args, result.returncode, result.stdout.decode("utf-8"), result.stderr.decode("utf-8")
        )

    return run
