import json
import re

import pytest

from rtpaudit.listen.sheet import CAUTIONS, SCALE, rating_sheet

NAMES = ["clip-01", "clip-02", "clip-03"]


@pytest.fixture(scope="module")
def sheet() -> str:
    return rating_sheet("c0ffee", NAMES, "clips", [8.0, 10.0, 12.0])


def data(sheet: str) -> dict:
    return json.loads(re.search(r'id="check-data">(.*?)</script>', sheet, re.DOTALL)[1])


def test_the_scale_is_that_of_p_800() -> None:
    """ITU-T P.800, annex B, from memory: 5 excellent, 4 good, 3 fair, 2 poor, 1 bad."""
    assert SCALE == {5: "Excellent", 4: "Good", 3: "Fair", 2: "Poor", 1: "Bad"}


def test_it_knows_its_clips_and_nothing_about_them(sheet: str) -> None:
    assert data(sheet) == {
        "check": "c0ffee",
        "clips": [{"name": name, "file": f"clips/{name}.wav"} for name in NAMES],
        "scale": {str(vote): word for vote, word in SCALE.items()},
    }
    for word in ("anchor", "worst", "stream", "packet"):
        assert word not in sheet.split("</style>")[1].lower(), word


def test_each_vote_is_a_radio_button_with_its_word(sheet: str) -> None:
    buttons = re.findall(r'name="vote" value="(\d)".*?<span>(\w+)</span>', sheet, re.DOTALL)
    assert buttons == [(str(vote), word) for vote, word in SCALE.items()]


def test_consent_law_retention_and_hearing_are_spoken_of(sheet: str) -> None:
    for title, text in CAUTIONS:
        assert f"<dt>{title}</dt><dd>{text}</dd>" in sheet
    assert {"Consent and law", "Retention", "Hearing"} <= {title for title, _ in CAUTIONS}


def test_nothing_may_be_loaded_from_anywhere(sheet: str) -> None:
    policy = re.search(r'Content-Security-Policy" content="(.*?)"', sheet)[1]
    assert "default-src &#39;none&#39;" in policy
    assert "connect-src &#39;none&#39;" in policy
    assert not re.search(r"""(?:src|href)=["']?(?:https?:)?//""", sheet)
    assert "http" not in sheet.replace("http-equiv", "")


def test_it_announces_how_long_it_takes(sheet: str) -> None:
    assert "Listening check, 3 clips, some 1 minute<" in sheet
    assert "1 clip, some 1 minute<" in rating_sheet("c0ffee", NAMES[:1], "clips", [8.0])
