import csv
import json
import re
from pathlib import Path

import numpy as np
import pytest

from rtpaudit.errors import UnusableArguments, UnusableOutput
from rtpaudit.listen.outcome import Outcome, work_out, write_outcome
from rtpaudit.listen.words import outcome_text
from tests.listen.ratings import PREDICTED, VOTES, row, write_check, write_key


@pytest.fixture
def place(tmp_path: Path) -> Path:
    write_check(tmp_path)
    return tmp_path


def files(place: Path) -> list[Path]:
    return [place / f"{name}.csv" for name in VOTES]


@pytest.fixture
def outcome(place: Path) -> Outcome:
    return work_out(files(place))


def table(path: Path) -> list[dict[str, str]]:
    with open(path, newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def test_each_clip_has_its_mean_opinion_and_its_prediction(outcome: Outcome) -> None:
    rows = outcome.clips()
    assert [one["clip"] for one in rows] == ["clip-01", "clip-02", "clip-03", "clip-04"]
    assert [one["mean_opinion"] for one in rows] == pytest.approx([4 / 3, 8 / 3, 13 / 3, 14 / 3], abs=1e-3)
    assert [one["predicted_mos"] for one in rows] == PREDICTED
    assert rows[0]["error"] == pytest.approx(1.5 - 4 / 3, abs=1e-3)
    assert rows[0]["interval_high"] - rows[0]["mean_opinion"] == pytest.approx(4.303 / 3, abs=2e-3)


def test_the_prediction_is_compared_over_all_clips(outcome: Outcome) -> None:
    figures = outcome.figures()
    means = np.array([4 / 3, 8 / 3, 13 / 3, 14 / 3])
    assert figures["correlation"] == pytest.approx(np.corrcoef(PREDICTED, means)[0, 1], abs=1e-3)
    assert figures["rmse"] == pytest.approx(np.sqrt(((means - PREDICTED) ** 2).sum() / 3), abs=1e-3)
    assert (figures["listeners"], figures["clips"], figures["votes"]) == (3, 4, 12)
    assert 0.7 < figures["krippendorff_alpha_ordinal"] < 1.0


def test_the_folder_holds_tables_text_page_and_document(outcome: Outcome, tmp_path: Path) -> None:
    write_outcome(outcome, tmp_path / "out")
    assert [one["clip"] for one in table(tmp_path / "out" / "opinions.csv")] == [f"clip-0{k}" for k in range(1, 5)]
    assert {one["listener"] for one in table(tmp_path / "out" / "listeners.csv")} == set(VOTES)
    assert len(table(tmp_path / "out" / "votes.csv")) == 12
    document = json.loads((tmp_path / "out" / "outcome.json").read_bytes())
    assert document["schema"] == "rtpaudit listening outcome"
    assert document["opinions"] == outcome.clips()
    assert (
        (tmp_path / "out" / "outcome.txt").read_text("utf-8").startswith("Listening check c0ffee: 3 listeners, 4 clips")
    )


def test_what_listeners_wrote_stays_text(outcome: Outcome, tmp_path: Path) -> None:
    write_outcome(outcome, tmp_path / "out")
    page = (tmp_path / "out" / "index.html").read_text("utf-8")
    assert "<script" not in page
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page


def test_the_picture_shows_every_clip_at_its_place(outcome: Outcome, tmp_path: Path) -> None:
    write_outcome(outcome, tmp_path / "out")
    page = (tmp_path / "out" / "index.html").read_text("utf-8")
    circles = [tuple(map(float, one)) for one in re.findall(r'<circle cx="([\d.]+)" cy="([\d.]+)"', page)]
    assert len(circles) == 3
    assert page.count("<rect ") == 1
    # 420 units are four points of opinion.
    assert circles[0] == pytest.approx((0.5 / 4 * 420, 420 - (1 / 3) / 4 * 420), abs=0.05)


def test_the_text_tells_figures_and_their_names(outcome: Outcome) -> None:
    text = outcome_text(outcome.figures(), outcome.clips())
    for words in ("Krippendorff's alpha", "RMSE*, ITU-T P.1401", "first-order mapping", "95 % interval"):
        assert words in text
    assert "clip-01  1.33 ± 1.43" in text


def test_names_and_comments_stay_out_of_a_private_outcome(place: Path, tmp_path: Path) -> None:
    write_outcome(work_out(files(place), private=True), tmp_path / "out")
    for path in (tmp_path / "out").iterdir():
        text = path.read_text("utf-8")
        assert "Ann" not in text
        assert "alert" not in text


def test_one_listener_and_one_clip_are_enough_for_an_outcome(place: Path, tmp_path: Path) -> None:
    (tmp_path / "lone.csv").write_text("check,listener,clip,vote\nc0ffee,Ann,clip-01,4\n", "utf-8")
    outcome = work_out([tmp_path / "lone.csv"], place / "key.csv")
    write_outcome(outcome, tmp_path / "out")
    figures = outcome.figures()
    assert figures["rmse"] is figures["krippendorff_alpha_ordinal"] is figures["correlation"] is None
    assert "too few rated clips" in (tmp_path / "out" / "outcome.txt").read_text("utf-8")


def test_clips_that_cannot_be_predicted_are_told_without_it(place: Path) -> None:
    rows = [row(f"clip-0{k}", predicted_mos=float("nan")) for k in range(1, 5)]
    write_key(place / "key.csv", *rows)
    outcome = work_out(files(place))
    assert outcome.figures()["compared_clips"] == 0
    assert "no prediction" in outcome_text(outcome.figures(), outcome.clips())


def test_the_key_is_found_beside_the_ratings_above_them_and_in_a_folder_here(place: Path) -> None:
    deep = place / "check" / "listeners"
    deep.mkdir(parents=True)
    for path in files(place):
        path.rename(deep / path.name)
    moved = [deep / path.name for path in files(place)]
    assert work_out(moved).figures()["clips"] == 4
    (place / "key.csv").rename(place / "check" / "key.csv")
    for path in moved:
        path.rename(place / path.name)
    assert work_out(files(place)).figures()["clips"] == 4


def test_a_key_of_another_check_is_not_taken(place: Path) -> None:
    write_key(place / "other.csv", row(check="decaf"))
    with pytest.raises(UnusableArguments, match="key of another listening check"):
        work_out(files(place), place / "other.csv")
    (place / "other.csv").rename(place / "key.csv")
    with pytest.raises(UnusableArguments, match=r"no key\.csv of listening check 'c0ffee' lies near the ratings"):
        work_out(files(place))


def test_files_without_any_rating_are_refused(place: Path) -> None:
    (place / "empty.csv").write_text("check,listener,clip,vote\n", "utf-8")
    with pytest.raises(UnusableArguments, match="holds no rating"):
        work_out([place / "empty.csv"])


def test_a_folder_that_is_not_ours_is_refused(outcome: Outcome, tmp_path: Path) -> None:
    (tmp_path / "diary").mkdir()
    with pytest.raises(UnusableOutput, match="diary"):
        write_outcome(outcome, tmp_path / "diary")
