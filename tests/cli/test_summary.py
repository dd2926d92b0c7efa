"""The summary: which call is bad, which way and how bad, in a screenful of 80 columns."""

from dataclasses import replace
from datetime import tzinfo
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from rtpaudit.assess.results import Assessment
from rtpaudit.cli.summary import as_text, figure
from rtpaudit.report.folder import write_folder
from tests.report import made

UTC = ZoneInfo("UTC")


def summary(place: Path, found: Assessment | None = None, zone: tzinfo = UTC, columns: int = 80) -> str:
    audit = made.Audited(found)
    return as_text(write_folder(audit, place / "out"), audit.assessment, [], zone, columns)


def calls(*ratings: float) -> Assessment:
    found = Assessment(captures=["a.pcap"])
    for number, rating in enumerate(ratings, start=1):
        note = "" if rating == rating else "no values for opus"
        there = made.stream(f"s{2 * number - 1:02d}", f"c{number:02d}", r_factor=rating, rating_note=note)
        back = made.stream(f"s{2 * number:02d}", f"c{number:02d}", **made.mirrored(r_factor=93.2))
        found.streams += [there, back]
        found.calls.append(made.call(f"c{number:02d}", [there], [back], r_factor=rating, callee_hears_r=rating,
                                     caller_hears_r=93.2, quality_band="medium", loss_pct=0.0))  # fmt: skip
    return found


def test_the_worst_call_comes_first_with_each_ear(tmp_path: Path) -> None:
    lines = summary(tmp_path).splitlines()
    worst = next(number for number, line in enumerate(lines) if line.startswith("c0"))
    assert lines[worst] == "c02  22:14:20  2001:db8::10 → 2001:db8::20  10 s  PCMU"
    assert lines[worst + 1].split() == ["caller", "hears", "R", "61", "low", "2.4", "%", "lost"]
    assert lines[worst + 2].split() == ["callee", "hears", "R", "93.2", "best", "nothing", "lost"]


def test_the_heading_says_what_was_audited_and_in_which_zone(tmp_path: Path) -> None:
    lines = summary(tmp_path).splitlines()
    assert lines[0] == "complaint.pcap: 2 calls, 5 streams, 0 packets"
    assert lines[1] == "2023-11-14 22:13:20 to 22:14:31 UTC. Worst first:"
    assert "2023-11-15 07:13:20 to 07:14:31 Asia/Tokyo." in summary(tmp_path, zone=ZoneInfo("Asia/Tokyo"))


@pytest.mark.parametrize("columns", [60, 80, 100])
def test_no_line_is_wider_than_the_terminal(tmp_path: Path, columns: int) -> None:
    found = made.assessment()
    found.calls[0].caller = "a party with a name that goes on " * 4
    for line in summary(tmp_path, found, columns=columns).splitlines():
        assert len(line) <= columns, line


def test_the_answer_stands_in_the_first_screenful(tmp_path: Path) -> None:
    lines = summary(tmp_path, calls(61.0, 55.0, 70.0, 90.0, 30.0, 81.0, 82.0)).splitlines()
    assert len(lines) <= 30
    assert next(line for line in lines if line.startswith("c0")).startswith("c05")
    assert any("2 more calls, none of those rated below R 82" in line for line in lines)


def test_many_calls_are_counted_by_band(tmp_path: Path) -> None:
    found = calls(*[75.0] * 7)
    assert "By the worse ear 7 medium." in " ".join(summary(tmp_path, found).split())


def test_a_direction_without_a_stream_is_nothing_and_not_a_rating(tmp_path: Path) -> None:
    lone = made.stream("s01", "c01")
    found = Assessment(captures=["a.pcap"], streams=[lone], calls=[made.call("c01", [lone], [], callee_hears_r=93.2)])
    text = summary(tmp_path, found)
    assert "caller hears  nothing: no stream goes this way" in text
    assert "callee hears  R 93.2 best" in text


def test_what_cannot_be_rated_says_why(tmp_path: Path) -> None:
    text = summary(tmp_path, calls(float("nan")))
    assert "callee hears  not rated  " in text
    assert "not rated: no values for opus" in text


def test_packets_that_came_too_late_are_told_beside_the_lost_ones(tmp_path: Path) -> None:
    there = made.stream("s01", "c01", packets_expected=1000, packets_lost=12, packets_discarded=25, jitter_ms=14.46)
    found = Assessment(captures=["a.pcap"], streams=[there], calls=[made.call("c01", [there], [], callee_hears_r=60.0)])
    assert "callee hears  R 60 low               1.2 % lost, 2.5 % late, jitter 14.5 ms" in summary(tmp_path, found)


def test_calls_without_a_rating_follow_by_loss(tmp_path: Path) -> None:
    found = calls(float("nan"), 90.0, float("nan"))
    found.calls[2].figures.loss_pct = 8.0
    ids = [line[:3] for line in summary(tmp_path, found).splitlines() if line.startswith("c0")]
    assert ids == ["c02", "c03", "c01"]


def test_escapes_in_names_do_not_reach_the_terminal(tmp_path: Path) -> None:
    found = made.assessment()
    found.captures = ["a\x1b[2J.pcap"]
    found.calls[0].caller = "\x1b]0;owned\x07\u202eboss"
    found.damage[0] = replace(found.damage[0], what="\x1b[31m", capture="\x9b.pcap")
    text = summary(tmp_path, found)
    assert not set(text) & {"\x1b", "\x07", "\u202e", "\x9b"}


def test_damage_is_told_with_file_and_offset(tmp_path: Path) -> None:
    assert "Damage in complaint.pcap at octet 4242" in summary(tmp_path)


def test_much_damage_is_counted(tmp_path: Path) -> None:
    found = made.assessment()
    found.damage *= 10
    assert "7 more places with damage: damage.csv." in summary(tmp_path, found)


def test_the_caution_stands_once(tmp_path: Path) -> None:
    text = " ".join(summary(tmp_path).split())
    for word in ("consent", "interception law", "retention", "local rules", "loud"):
        assert text.count(word) == 1


def test_a_capture_without_rtp_is_said_so(tmp_path: Path) -> None:
    assert summary(tmp_path, Assessment(captures=["dns.pcap"])).startswith("dns.pcap: no stream of RTP was found.")


def test_many_captures_are_counted(tmp_path: Path) -> None:
    found = made.assessment()
    found.captures = [f"ring{number}.pcap" for number in range(9)]
    assert "ring0.pcap, ring1.pcap, ring2.pcap and 6 more: 2 calls" in summary(tmp_path, found)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (2.4, "2.4"),
        (0.01234, "0.0123"),
        (93.206, "93.2"),
        (99.96, "100"),
        (123.4, "123"),
        (1234.5, "1,234"),
    ],
)
def test_figures_have_three_digits_and_no_power_of_ten(value: float, text: str) -> None:
    assert figure(value) == text
