from contextlib import suppress
from pathlib import Path

import numpy as np
import pytest

from rtpaudit.errors import RtpAuditError, UnusableArguments
from rtpaudit.listen.votes import Vote, read_votes, together

GOOD = (
    "check,listener,session,clip,vote,comment,place,plays,rated_at\r\n"
    '"c0ffee","Ann","aa","clip-01","4","fine, but ""thin""","1","1","2026-03-03T10:00:00Z"\r\n'
    '"c0ffee","Ann","aa","clip-02","","","2","0",""\r\n'
)
CLIPS = ["clip-01", "clip-02"]


def vote(listener: str, clip: str, value: int | None, session: str = "s", at: str = "", **more: str) -> Vote:
    facts = {"check": "c0ffee", "comment": ""} | more
    return Vote(facts["check"], listener, session, clip, value, facts["comment"], at)


def read(place: Path, text: str | bytes) -> list[Vote]:
    path = place / "votes.csv"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return read_votes([path])


def test_a_file_of_the_sheet_is_read(tmp_path: Path) -> None:
    first, second = read(tmp_path, GOOD)
    assert first == Vote("c0ffee", "Ann", "aa", "clip-01", 4, 'fine, but "thin"', "2026-03-03T10:00:00Z")
    assert second.vote is None


@pytest.mark.parametrize("separator", [";", "\t"])
def test_what_a_spreadsheet_saved_again_is_read_too(tmp_path: Path, separator: str) -> None:
    rows = [["check", "listener", "clip", "vote"], ["c0ffee", "Ann", "clip-01", "3"]]
    text = "\ufeff" + "\n".join(separator.join(row) for row in rows) + "\n"
    assert [(one.listener, one.clip, one.vote) for one in read(tmp_path, text)] == [("Ann", "clip-01", 3)]


def test_every_prefix_is_read_or_refused_as_ours(tmp_path: Path) -> None:
    for length in range(len(GOOD)):
        with suppress(RtpAuditError):
            read(tmp_path, GOOD[:length])


@pytest.mark.parametrize(
    "octets", [b"", b"\xff\xfe\x00", bytes(2000), b"a,b\n1,2\n", b"\n\n\n", b"check,listener,clip\n"]
)
def test_what_is_no_file_of_ratings_is_refused(tmp_path: Path, octets: bytes) -> None:
    with pytest.raises(UnusableArguments, match=r"votes\.csv: is no file of ratings"):
        read(tmp_path, octets)


@pytest.mark.parametrize("value", ["6", "0", "-1", "4.5", "good", "٤"])
def test_what_is_no_vote_is_refused_with_its_line(tmp_path: Path, value: str) -> None:
    with pytest.raises(UnusableArguments, match=r"line 2: .* is no vote, which is 1 to 5"):
        read(tmp_path, f"check,listener,clip,vote\nc0ffee,Ann,clip-01,{value}\n")


def test_a_file_without_end_is_refused_before_it_is_read_whole(tmp_path: Path) -> None:
    with pytest.raises(UnusableArguments):
        read(tmp_path, GOOD + "x" * (5 << 20))


def test_a_file_that_is_not_there_is_named() -> None:
    with pytest.raises(UnusableArguments, match=r"nowhere\.csv: cannot be read"):
        read_votes([Path("nowhere.csv")])


def test_votes_become_a_matrix_of_listeners_and_clips() -> None:
    rows = [vote("Ann", "clip-02", 2), vote("Ben", "clip-01", 5), vote("Ann", "clip-01", None)]
    found = together(rows, CLIPS)
    assert found.listeners == ["Ann", "Ben"]
    assert np.array_equal(found.matrix, [[np.nan, 2.0], [5.0, np.nan]], equal_nan=True)
    assert found.replaced == 0


def test_of_a_sheet_saved_twice_the_later_vote_holds() -> None:
    rows = [vote("Ann", "clip-01", 2, at="2026-03-03T11"), vote("Ann", "clip-01", 4, at="2026-03-03T10")]
    found = together(rows, CLIPS)
    assert found.matrix[0, 0] == 2.0
    assert found.replaced == 1


def test_the_same_file_given_twice_changes_nothing() -> None:
    rows = [vote("Ann", "clip-01", 2, at="2026-03-03T11"), vote("Ann", "clip-02", 3, at="2026-03-03T12")]
    once, twice = together(rows, CLIPS), together(rows * 2, CLIPS)
    assert np.array_equal(once.matrix, twice.matrix)
    assert twice.replaced == 0


def test_a_later_sheet_without_a_vote_takes_none_away() -> None:
    rows = [vote("Ann", "clip-01", 4, at="2026-03-03T10"), vote("Ann", "clip-01", None, at="")]
    assert together(rows, CLIPS).matrix[0, 0] == 4.0
    assert together(rows[::-1], CLIPS).matrix[0, 0] == 4.0


def test_two_listeners_of_one_name_are_two() -> None:
    found = together([vote("Ann", "clip-01", 4, "aa"), vote("Ann", "clip-01", 2, "bb")], CLIPS)
    assert found.listeners == ["Ann (aa)", "Ann (bb)"]
    assert found.matrix[:, 0].tolist() == [4.0, 2.0]


def test_votes_of_two_checks_do_not_mix() -> None:
    with pytest.raises(UnusableArguments, match="different listening checks: c0ffee, decaf"):
        together([vote("Ann", "clip-01", 4), vote("Ann", "clip-01", 4, check="decaf")], CLIPS)


def test_a_clip_that_the_key_does_not_have_is_refused() -> None:
    with pytest.raises(UnusableArguments, match="'clip-99' is rated, which the key does not have"):
        together([vote("Ann", "clip-99", 4)], CLIPS)


def test_names_and_comments_can_be_left_out() -> None:
    found = together([vote("Ann", "clip-01", 4, comment="I know her")], CLIPS).without_names()
    assert found.listeners == ["listener 1"]
    assert found.comments == []
    assert found.matrix[0, 0] == 4.0


@pytest.mark.parametrize("noise", ["\0", '"' + "x" * 200_000])
def test_noise_within_a_file_is_refused_with_its_line(tmp_path: Path, noise: str) -> None:
    with pytest.raises(UnusableArguments, match=r"votes\.csv: line \d"):
        read(tmp_path, GOOD + noise)
