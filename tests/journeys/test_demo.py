"""The demo: one command, no data of one's own, and a report that shows good and bad calls."""

import json
import subprocess
from pathlib import Path
from typing import Any

import pytest

from tests.journeys.conftest import Command


@pytest.fixture(scope="module")
def shown(command: Command) -> subprocess.CompletedProcess[str]:
    result = command("demo", "--zone", "UTC")
    assert result.returncode == 0, result.stderr
    return result


@pytest.fixture(scope="module")
def document(place: Path, shown: subprocess.CompletedProcess[str]) -> dict[str, Any]:
    return json.loads((place / "demo-audit" / "audit.json").read_bytes())


def test_it_shows_a_good_call_a_lossy_one_and_a_jittery_one(document: dict[str, Any]) -> None:
    calls = document["calls"]
    assert any(call["loss_pct"] == 0 and call["jitter_ms"] < 2 and call["quality_band"] == "best" for call in calls)
    assert any(row["duration_ms"] >= 60 for row in document["gaps"]), "a burst longer than concealment covers"
    assert any(call["jitter_ms"] > 10 for call in calls)


def test_the_worst_call_is_named_first(document: dict[str, Any], shown: subprocess.CompletedProcess[str]) -> None:
    worst = min((call for call in document["calls"] if call["streams"]), key=lambda call: call["r_factor"])
    named = [line.split()[0] for line in shown.stdout.splitlines() if line[:1] == "c" and line[1:3].isdigit()]
    assert named[0] == worst["call"]


def test_every_call_can_be_heard(place: Path, document: dict[str, Any]) -> None:
    for call in document["calls"]:
        if not call["streams"]:
            assert call["outcome"] == "refused"
            continue
        assert (place / "demo-audit" / "audio" / f"{call['call']}.wav").stat().st_size > 100_000


def test_nothing_in_it_is_damaged(document: dict[str, Any]) -> None:
    assert document["damage"] == []


def test_it_can_be_run_again(command: Command, shown: subprocess.CompletedProcess[str]) -> None:
    assert command("demo", "--quiet").returncode == 0
