"""The sentence for the ticket, and the facts under it."""

from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from rtpaudit.assess.results import AssessedCall
from rtpaudit.report.clock import Clock
from rtpaudit.report.verdict import gravest_first, own_sentence, verdict
from tests.report import made

CLOCK = Clock(ZoneInfo("UTC"))


def call(caller_r: float = np.nan, callee_r: float = np.nan, **changed: Any) -> AssessedCall:
    there, back = made.stream("s01"), made.stream("s02", **made.mirrored())
    return made.call("c01", [there], [back], caller_hears_r=caller_r, callee_hears_r=callee_r, **changed)


def finding(name: str, severity: str = "fault", **changed: Any) -> dict[str, Any]:
    return {"finding": name, "severity": severity, "r_points": None, "where": "unknown", "says": f"It was {name}.",
            "check_next": "Look there."} | changed  # fmt: skip


def test_the_headline_speaks() -> None:
    told = verdict(
        call(50.0, 93.0, headline="loss-burst"),
        [finding("load"), finding("loss-burst", where="before capture point")],
        CLOCK,
    )
    assert (told.sentence, told.check_next) == ("It was loss-burst.", "Look there.")
    assert told.where.startswith("Before the capture point")


def test_a_finding_that_is_no_headline_does_not_speak() -> None:
    told = verdict(call(93.0, 93.0), [finding("marking-absent", "remark")], CLOCK)
    assert (told.sentence, told.where) == ("Both sides heard each other well.", "")


@pytest.mark.parametrize(
    ("caller_r", "callee_r", "sentence"),
    [
        (93.0, 80.0, "Both sides heard each other well."),
        (93.0, 79.9, "The callee heard somewhat impaired speech."),
        (60.0, 93.0, "The caller heard poor speech."),
        (93.0, 12.0, "The callee heard very poor speech."),
        (55.0, 55.0, "Each side heard poor speech."),
        (np.nan, 93.0, "The callee heard the other side well; the other direction cannot be rated."),
        (np.nan, np.nan, "What was heard in this call cannot be rated: nothing tells how it was coded."),
    ],
)
def test_without_a_finding_the_ratings_speak(caller_r, callee_r, sentence) -> None:
    assert own_sentence(call(caller_r, callee_r)) == sentence


def test_a_poor_rating_names_what_was_missing() -> None:
    one = call(93.0, 40.0)
    one.from_caller[0].figures.packets_expected = 1000
    one.from_caller[0].figures.packets_lost = 75
    one.from_caller[0].figures.packets_discarded = 20
    assert (
        own_sentence(one)
        == "The callee heard very poor speech: 7.5 % of the packets were lost and 2 % of the packets came too late."
    )


@pytest.mark.parametrize(
    ("outcome", "status", "sentence"),
    [
        ("answered", 200, "The call was answered, and no audio of it was captured."),
        ("refused", 486, "The callee did not take the call: status 486."),
        ("cancelled", 487, "The caller gave up before anybody answered: status 487."),
        ("failed", 503, "The call could not be set up: status 503."),
        ("no reply", None, "Nobody replied to the call."),
    ],
)
def test_a_call_without_sound_says_what_became_of_it(outcome, status, sentence) -> None:
    assert own_sentence(made.call("c01", [], [], outcome=outcome, status_code=status)) == sentence


def test_the_worst_passage_is_named_with_its_time_and_ear() -> None:
    one = call(93.0, 80.0)
    table = made.windows(5)
    table.r_factor[3] = 41.26
    one.from_caller[0].windows = table
    assert verdict(one, [], CLOCK).worst == "22:13:26 to 22:13:28, R 41.3 at the callee’s ear"


def test_an_even_call_has_no_worst_passage() -> None:
    one = call(90.0, 90.0)
    one.from_caller[0].windows = made.windows(5)
    assert verdict(one, [], CLOCK).worst == "none: even from beginning to end"


def test_ratings_stand_with_their_words() -> None:
    assert verdict(call(57.46, 90.06), [], CLOCK).ratings == "caller R 57.5, poor; callee R 90.1, best"


def test_the_headline_leads_then_the_gravest() -> None:
    found = [
        finding("a", "remark"),
        finding("b", "fault", r_points=6.0),
        finding("c", "fault", r_points=9.0),
        finding("d", "concern"),
    ]
    assert [row["finding"] for row in gravest_first(found, "d")] == ["d", "c", "b", "a"]
