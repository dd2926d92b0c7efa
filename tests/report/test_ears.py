"""What each side heard: the way down to its rating."""

from pathlib import Path

import pytest

from rtpaudit.emodel.budget import STEPS
from rtpaudit.profile import Playout
from rtpaudit.report.ears import EXPLAINS, STEP_NOTES, STEP_WORDS, ears
from rtpaudit.walk import Audit, audit
from tests.report import made

DEMO = Path(__file__).parents[2] / "rtpaudit" / "demo" / "demo.pcap"


@pytest.fixture(scope="module")
def demo() -> Audit:
    return audit(DEMO)


def test_the_steps_lead_down_to_the_rating(demo: Audit) -> None:
    for call in demo.assessment.calls:
        for ear in ears(call, [], Playout()):
            if ear["budget"]:
                assert sum(step["points"] for step in ear["budget"]["steps"]) == pytest.approx(
                    ear["budget"]["r"], abs=0.05
                )
                assert ear["budget"]["r"] == pytest.approx(ear["r"], abs=0.05)


def test_the_caller_hears_what_the_callee_said() -> None:
    call = made.call("c01", [made.stream("s01")], [made.stream("s02")], caller_hears_r=61.0, callee_hears_r=93.2)
    caller, callee = ears(call, [], Playout())
    assert (caller["side"], caller["streams"], caller["r"], caller["band"]) == ("caller", ["s02"], 61.0, "low")
    assert (callee["side"], callee["streams"], callee["r"], callee["band"]) == ("callee", ["s01"], 93.2, "best")


def test_an_ear_that_nothing_reached_has_neither_rating_nor_steps() -> None:
    (caller, _) = ears(made.call("c01", [made.stream("s01")], []), [], Playout())
    assert caller == {"side": "caller", "r": None, "band": "", "streams": [], "note": "", "budget": None, "curve": None}


def test_a_step_names_the_findings_that_explain_it(demo: Audit) -> None:
    (call,) = [call for call in demo.assessment.calls if any(one.figures.packets_lost for one in call.streams)]
    lossy = next(one.id for one in call.streams if one.figures.packets_lost)
    findings = [{"finding": "marking-absent", "stream": lossy}, {"finding": "loss-burst", "stream": lossy}]
    by_step = {
        step["step"]: step["findings"]
        for ear in ears(call, findings, Playout())
        if lossy in ear["streams"]
        for step in ear["budget"]["steps"]
    }
    assert by_step["loss"] == [2]
    assert by_step["Idd"] == []


def test_every_step_has_words_and_a_note_with_its_source() -> None:
    assert set(STEP_WORDS) == set(STEPS)
    assert set(STEP_NOTES) == {*STEPS, "R"}
    assert all("Source: ITU-T G.107" in note for note in STEP_NOTES.values())
    assert set(EXPLAINS) <= set(STEPS)
