"""Options that narrow down: what reaches the walk, and what is said where nothing fits."""

import json
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from rtpaudit.errors import NearCall, NothingChosen
from tests.cli.conftest import Run
from tests.report import made

NEAR = [
    NearCall("c03", "0142", "ferry.desk", 1_772_534_520_000_000_000, 1_772_534_640_000_000_000),
    NearCall("c11", "0143", "ferry.desk", 1_772_538_120_000_000_000, 1_772_538_150_000_000_000),
]


def test_what_is_known_of_the_call_reaches_the_walk(run: Run) -> None:
    asked = run(
        "triage", "a.pcap", "--party", "0142", "--party", "ferry desk", "--at", "10:42", "--call", "c07",
        "--call", "x@y", "--zone", "Europe/Oslo", "--near", "192.0.2.10", "--digits",
    ).asked  # fmt: skip
    select, near, digits = asked[4:7]
    assert (select.parties, select.at, select.calls) == (("0142", "ferry desk"), "10:42", ("c07", "x@y"))
    assert select.zone == ZoneInfo("Europe/Oslo")
    assert (near, digits) == ("192.0.2.10", True)


def test_without_such_options_all_is_measured_and_digits_are_masked(run: Run) -> None:
    assert run("triage", "a.pcap").asked[4:7] == [None, None, False]


def test_where_nothing_fits_one_line_names_the_nearest_calls(run: Run) -> None:
    result = run("triage", "a.pcap", "--party", "0142", "--zone", "Europe/Oslo", found=NothingChosen([], NEAR))
    assert result.status == 2
    assert result.out == ""
    assert result.err == (
        "rtpaudit: no call is what was asked for; nearest are c03 (2026-03-03 11:42:00 for 120 s, 0142 → ferry.desk), "
        "c11 (2026-03-03 12:42:00 for 30 s, 0143 → ferry.desk); choose with --call\n"
    )


def test_a_private_line_names_ids_and_times_alone(run: Run) -> None:
    result = run("triage", "a.pcap", "--call", "0142@y", "--private", found=NothingChosen(["0142@y"], NEAR))
    assert "c03" in result.err
    assert not any(name in result.err for name in ("0142", "0143", "ferry"))


def test_a_call_that_is_not_there_is_named(run: Run) -> None:
    assert "there is no call c99; " in run("triage", "a.pcap", "--call", "c99", found=NothingChosen(["c99"], NEAR)).err


def test_a_capture_without_calls_has_none_to_choose(run: Run) -> None:
    result = run("triage", "a.pcap", "--party", "0142", found=NothingChosen([], []))
    assert (result.status, result.err.count("\n")) == (2, 1)
    assert "no call was found at all" in result.err


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--at", "noon"), "no time"),
        (("--at", ""), "--at"),
        (("--party", ""), "empty"),
        (("--private", "--digits"), "leave out --digits"),
        (("--private", "--excerpt", "x.pcapng"), "leave out --excerpt"),
        (("--excerpt", "missing/x.pcapng"), "no such folder"),
    ],
)
def test_unusable_options_are_refused_before_anything_is_read(run: Run, options: tuple[str, ...], said: str) -> None:
    result = run("triage", "a.pcap", *options)
    assert (result.status, result.asked) == (2, [])
    assert said in result.err


def test_the_excerpt_is_named_in_both_summaries(run: Run, tmp_path: Path) -> None:
    class Excerpted(made.Audited):
        def excerpt(self, path: Path) -> list[Path]:
            return [path, path.with_name("x-2.pcapng")]

    result = run("triage", "a.pcap", "--excerpt", "x.pcapng", found=Excerpted())
    assert "Excerpt in x.pcapng, x-2.pcapng: " in result.out
    result = run("triage", "a.pcap", "--excerpt", "x.pcapng", "--json", found=Excerpted())
    assert json.loads(result.out)["excerpt"] == ["x.pcapng", "x-2.pcapng"]


def test_a_file_that_is_no_excerpt_is_refused_before_anything_is_read(run: Run, tmp_path: Path) -> None:
    (tmp_path / "a.pcap").write_bytes(b"precious")
    result = run("triage", "a.pcap", "--excerpt", "a.pcap")
    assert (result.status, result.asked) == (2, [])
    assert (tmp_path / "a.pcap").read_bytes() == b"precious"


def test_the_summary_says_of_how_many_calls_these_are_some(run: Run) -> None:
    found = made.assessment()
    found.calls_in_all = 1240
    assert ": 2 of 1,240 calls, " in run("triage", "a.pcap", found=made.Audited(found)).out
