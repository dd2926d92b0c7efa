"""Shared options: what their texts mean."""

from datetime import UTC, datetime
from pathlib import Path

import pytest

from rtpaudit.cli import options
from rtpaudit.errors import UnusableArguments, UnusableProfile
from rtpaudit.signalling.payload_types import Encoding


@pytest.mark.parametrize(
    ("capture", "folder"),
    [
        ("complaint.pcap", "complaint-audit"),
        ("in/there/complaint.pcapng", "complaint-audit"),
        ("ring.pcap.gz", "ring-audit"),
        ("RING.PCAP.ZST", "RING-audit"),
        ("call.2024.11.14.pcap", "call.2024.11.14-audit"),
        ("call", "call-audit"),
        (".pcap", ".pcap-audit"),
        ("-", "stdin-audit"),
    ],
)
def test_the_folder_is_named_after_the_first_capture(capture: str, folder: str) -> None:
    assert options.folder_for([capture, "other.pcap"]) == Path(folder)


def test_payload_types_are_told_apart_by_number() -> None:
    given = options.payload_types(["96=G722/8000", "111=opus/48000/2"])
    assert given[96] == Encoding("G722", 8000, 16000)
    assert given[111].name == "opus"
    assert options.payload_types(None) == {}


def test_the_same_thing_said_twice_is_no_contradiction() -> None:
    assert list(options.payload_types(["96=G722/8000", "96=g722/8000"])) == [96]


def test_two_things_said_of_one_payload_type_are_refused() -> None:
    with pytest.raises(UnusableArguments, match="--payload-type says two things of 96"):
        options.payload_types(["96=G722/8000", "96=opus/48000"])


@pytest.mark.parametrize("delay", [0.0, 40.0, 5000.0, None])
def test_a_delay_that_a_network_can_have_is_taken(delay: float | None) -> None:
    assert options.delay_ms(delay) == delay


@pytest.mark.parametrize("delay", [-0.1, 5000.1, float("nan"), float("inf")])
def test_any_other_delay_is_refused_with_the_range(delay: float) -> None:
    with pytest.raises(UnusableArguments, match="0 to 5000 ms"):
        options.delay_ms(delay)


@pytest.mark.parametrize("limit", [-0.1, 100.1, float("nan")])
def test_a_limit_where_no_rating_lies_is_refused(limit: float) -> None:
    with pytest.raises(UnusableArguments, match="0 to 100"):
        options.fail_below(limit)


def test_a_zone_follows_its_summer_time() -> None:
    zone = options.zone("Europe/Vienna")
    assert datetime(2024, 7, 1, 12, tzinfo=UTC).astimezone(zone).hour == 14
    assert datetime(2024, 1, 1, 12, tzinfo=UTC).astimezone(zone).hour == 13
    assert options.zone(None) is None


def test_a_profile_is_read_and_its_faults_are_told(tmp_path: Path) -> None:
    (tmp_path / "good.toml").write_text("[playout]\nnominal_ms = 80\n")
    assert options.profile(tmp_path / "good.toml").playout.nominal_ms == 80
    assert options.profile(None).playout.nominal_ms == 60
    with pytest.raises(UnusableProfile, match=r"missing\.toml"):
        options.profile(tmp_path / "missing.toml")
