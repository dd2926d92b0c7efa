"""The chain from capture to prediction held against PESQ, which hears what the chain predicts.

A few conditions of docs/pesq.md; all of them: ``python -m tests.evidence.table``.
"""

from pathlib import Path

import numpy as np
import pytest

from tests.evidence.conditions import Condition, Judged, correlation, judge, missing_packets, root_mean_square_error
from tests.evidence.table import DOCUMENT, DRAWS, row

pytest.importorskip("pesq", reason="the extra pesq is not installed")

LEAST_CORRELATION, GREATEST_ERROR_MOS = 0.95, 0.35
FEW = [
    Condition("none", 20, 0.0),
    *(Condition("random", packet_ms, loss) for packet_ms in (10, 20) for loss in (2.0, 8.0, 20.0)),
    Condition("bursts of ratio 2", 10, 10.0),
    Condition("random, too late", 20, 10.0),
]


@pytest.fixture(scope="module")
def judged(tmp_path_factory: pytest.TempPathFactory) -> list[Judged]:
    place = tmp_path_factory.mktemp("lossy")
    return [judge(one, 4, place) for one in FEW]


def test_the_prediction_goes_with_pesq(judged: list[Judged]) -> None:
    assert correlation(judged) >= LEAST_CORRELATION
    assert root_mean_square_error(judged) <= GREATEST_ERROR_MOS


def test_the_order_of_the_conditions_is_that_of_pesq(judged: list[Judged]) -> None:
    for ms in (10, 20):
        mine = [one for one in judged if one.condition.packet_ms == ms and one.condition.pattern in ("none", "random")]
        assert np.array_equal(np.argsort([one.predicted for one in mine]), np.argsort([one.pesq for one in mine]))


def test_concealment_is_worth_something_to_pesq(tmp_path: Path) -> None:
    concealed, silent = (judge(Condition("random", 10, 5.0, conceals), 2, tmp_path) for conceals in (True, False))
    assert concealed.missing_pct == silent.missing_pct
    assert concealed.pesq > silent.pesq + 0.2
    assert concealed.predicted > silent.predicted


def test_what_comes_too_late_sounds_like_what_is_lost(tmp_path: Path) -> None:
    lost, late = (judge(Condition(pattern, 20, 10.0), 4, tmp_path) for pattern in ("random", "random, too late"))
    assert late.missing_pct == pytest.approx(lost.missing_pct, abs=1.0)
    assert late.pesq == pytest.approx(lost.pesq, abs=0.2)
    assert late.predicted == pytest.approx(lost.predicted, abs=0.15)


@pytest.mark.parametrize("condition", [Condition("random", 20, 5.0)])
def test_the_document_says_what_a_run_says(condition: Condition, tmp_path: Path) -> None:
    shown = DOCUMENT.read_text("utf-8").split("with silence in place")[0].splitlines()
    told = row(judge(condition, DRAWS, tmp_path)).split(" | ")
    (written,) = [line.split(" | ") for line in shown if line.split(" | ")[:3] == told[:3]]
    for column in (4, 5):
        assert float(written[column]) == pytest.approx(float(told[column]), abs=0.05), "python -m tests.evidence.table"


@pytest.mark.parametrize(("share", "ratio"), [(0.05, 1.0), (0.1, 2.0), (0.1, 4.0)])
def test_packets_go_missing_as_often_and_in_such_runs_as_was_asked(share: float, ratio: float) -> None:
    missing = missing_packets(200_000, share, ratio, np.random.default_rng(1))
    runs = int((np.diff(missing.astype(np.int8)) == 1).sum())
    assert missing.mean() == pytest.approx(share, rel=0.05)
    assert missing.sum() / runs == pytest.approx(ratio / (1.0 - share), rel=0.05)
