from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import rtpaudit
from rtpaudit.columns import TABLES
from rtpaudit.findings import CATALOGUE
from rtpaudit.listen.clips import Clip, make_clips
from rtpaudit.listen.places import ANCHOR, OF_THE_SOUND, WORST, anchor_places, worst_places
from rtpaudit.profile import Profile
from rtpaudit.walk import Audit
from tests.listen.captures import capture, dial, tone, voice

LOST, LATE = (30.0, 30.4), (60.0, 60.2)
NO_FINDINGS = pd.DataFrame({column.name: [] for column in TABLES["findings"]})


def audited(place: Path, *arguments, **more) -> Audit:
    path = place / "call.pcap"
    path.write_bytes(capture(*arguments, **more))
    return rtpaudit.audit(path)


@pytest.fixture(scope="module")
def audit(tmp_path_factory: pytest.TempPathFactory) -> Audit:
    place = tmp_path_factory.mktemp("clips")
    return audited(place, voice(90.0), voice(90.0, "guest"), lost=[LOST], late=[LATE])


def clips_of(audit: Audit, count: int = 12, seed: int = 1, findings: pd.DataFrame = NO_FINDINGS, **more) -> list[Clip]:
    return make_clips(audit.assessment, findings, audit.sound, Profile(), count, seed, **more)


@pytest.fixture(scope="module")
def clips(audit: Audit) -> list[Clip]:
    return clips_of(audit)


def finding(
    name: str, stream: str, severity: str, begin_s: float = np.nan, end_s: float = np.nan, points: float = np.nan
) -> pd.DataFrame:
    row = {"finding": name, "stream": stream, "severity": severity}
    row |= {"from_s": begin_s, "to_s": end_s, "r_points": points}
    return pd.DataFrame([{column.name: row.get(column.name) for column in TABLES["findings"]}])


def test_the_impaired_passages_are_clips(clips: list[Clip]) -> None:
    worst = [one for one in clips if one.place.kind == WORST]
    for begin, end in (LOST, LATE):
        assert sum(one.begin_s < begin and end < one.begin_s + one.duration_s for one in worst) == 1
    assert sum(one.fate.packets_lost for one in worst) == 20
    assert sum(one.fate.packets_discarded for one in worst) == 10


def test_a_third_are_anchors_in_which_nothing_is_missing(clips: list[Clip]) -> None:
    anchors = [one for one in clips if one.place.kind == ANCHOR]
    assert len(anchors) == 4
    assert all(one.fate.packets_lost == one.fate.packets_discarded == 0 for one in anchors)
    assert {one.place.one.id for one in anchors} == {"s01", "s02"}


def test_clips_last_8_to_12_s_at_one_level_and_share_no_sound(clips: list[Clip]) -> None:
    for one in clips:
        assert 8.0 <= one.duration_s <= 12.0
        assert one.levelled.after_dbov == pytest.approx(-26.0, abs=0.2)
        assert not one.cut.overlaps([c.cut for c in clips if c is not one and c.place.one.id == one.place.one.id])


def test_a_clip_is_the_sound_as_heard_but_for_its_gain(audit: Audit, clips: list[Clip]) -> None:
    for one in clips:
        heard = audit.samples(one.place.one.id, heard=True)[one.cut.begin * 80 : one.cut.end * 80].astype(float)
        ours = one.levelled.samples.astype(float)
        middle = slice(1000, -1000)
        gain = 10.0 ** (one.levelled.gain_db / 20.0)
        assert np.abs(ours[middle] - heard[middle] * gain).max() <= 1.0


def test_the_order_follows_from_the_seed_and_from_nothing_else(audit: Audit, clips: list[Clip]) -> None:
    def order(some: list[Clip]) -> list[tuple[str, int]]:
        return [(one.place.one.id, one.cut.begin) for one in some]

    assert order(clips_of(audit)) == order(clips)
    orders = [order(clips_of(audit, seed=seed)) for seed in range(2, 8)]
    assert all(sorted(one) == sorted(order(clips)) for one in orders)
    assert len({tuple(one) for one in orders}) > 3
    worst = {(one.place.one.id, one.cut.begin) for one in clips if one.place.kind == WORST}
    firsts = {one[0] in worst for one in orders}
    assert firsts == {True, False}, "the first clip is of either kind"


def test_fewer_are_made_where_fewer_are_asked_for(audit: Audit) -> None:
    few = clips_of(audit, 3)
    assert sorted(one.place.kind for one in few) == [ANCHOR, WORST, WORST]
    assert sorted(one.place.kind for one in clips_of(audit, 2)) == [ANCHOR, WORST]
    assert [one.place.kind for one in clips_of(audit, 1)] == [WORST]


def test_a_clip_is_called_by_the_finding_that_covers_it(audit: Audit) -> None:
    told = [
        finding("marking-absent", "s01", "concern"),
        finding("random-loss", "s01", "concern", points=2.0),
        finding("loss-burst", "s01", "fault", 29.9, 30.5, points=20.0),
    ]
    made = clips_of(audit, findings=pd.concat(told, ignore_index=True))
    assert {one.place.reason for one in made if one.fate.packets_lost} == {"loss-burst and random-loss"}
    assert {one.place.reason for one in made if one.fate.packets_discarded} == {"random-loss"}


def test_findings_that_are_heard_in_a_clip_are_findings() -> None:
    assert set(CATALOGUE) >= OF_THE_SOUND


def test_a_finding_about_the_sound_itself_has_a_clip_and_no_anchor(audit: Audit) -> None:
    made = clips_of(audit, findings=finding("clipping", "s02", "concern"))
    mine = [one for one in made if one.place.one.id == "s02"]
    assert [(one.place.kind, one.place.reason) for one in mine] == [(WORST, "clipping")]


def test_a_remark_makes_no_clip(audit: Audit) -> None:
    made = clips_of(audit, findings=finding("clipping", "s02", "remark"))
    assert not any(one.place.reason == "clipping" for one in made)


def test_keys_that_were_pressed_are_left_out_unless_they_may_be_heard(tmp_path: Path) -> None:
    keys = dial("4111222233334444")
    speech = voice(40.0)
    first = 18 * 8000
    speech[first : first + len(keys)] = keys
    audit = audited(tmp_path, speech, voice(40.0, "guest"), lost=[(17.9, 17.98), (22.5, 22.6)])
    at = (18.0, 18.0 + len(keys) / 8000)
    plain = [one for one in clips_of(audit) if one.place.one.stream.ssrc == 1]
    assert not any(one.begin_s < at[1] and at[0] < one.begin_s + one.duration_s for one in plain)
    open_ = [one for one in clips_of(audit, digits=True) if one.place.one.stream.ssrc == 1]
    assert any(one.begin_s < at[1] and at[0] < one.begin_s + one.duration_s for one in open_)


def test_a_fax_is_no_speech(tmp_path: Path) -> None:
    audit = audited(tmp_path, tone(30.0, 2100, 12000), voice(30.0, "guest"), lost=[(15.0, 15.2)])
    assert {one.place.one.stream.ssrc for one in clips_of(audit)} == {2}


def test_the_worst_place_comes_first(audit: Audit) -> None:
    places = worst_places(audit.assessment.calls, NO_FINDINGS, 100)
    assert places[0].begin_s <= LOST[0] < places[0].end_s
    assert [one.R for one in places] == sorted(one.R for one in places)
    anchors = anchor_places(audit.assessment.calls, NO_FINDINGS, 100, 10.0)
    near = [one for one in anchors if one.one.stream.ssrc == 1 and abs(one.begin_s - LOST[0]) < 8.0]
    assert not near


def test_an_audit_without_sound_gives_no_clip(tmp_path: Path) -> None:
    path = tmp_path / "call.pcap"
    path.write_bytes(capture(voice(20.0), voice(20.0, "guest"), lost=[(10.0, 10.2)]))
    assert clips_of(rtpaudit.audit(path, sound=False)) == []
