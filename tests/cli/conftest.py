"""A command line whose walk brings what the test made by hand."""

from collections.abc import Callable
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest

from rtpaudit.cli import main, triage
from tests.report import made

Run = Callable[..., SimpleNamespace]


@pytest.fixture
def run(monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Run:
    """Run a command line in an empty directory; ``found`` is what the walk brings, an exception what it raises."""

    def run(*arguments: str, found: Any = None) -> SimpleNamespace:
        asked: list[Any] = []

        def walk(*handed: Any) -> made.Audited:
            asked.extend(handed)
            if isinstance(found, BaseException):
                raise found
            return found or made.Audited()

        monkeypatch.setattr(triage, "_audit", walk)
        monkeypatch.chdir(tmp_path)
        status = main(arguments)
        output = capsys.readouterr()
        return SimpleNamespace(status=status, out=output.out, err=output.err, asked=asked)

    return run
