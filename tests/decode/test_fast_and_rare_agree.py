"""Twin: the compiled path, the slow path, and two other people's dissectors read the same out of every fixture."""

from collections.abc import Callable, Sequence
from dataclasses import asdict
from pathlib import Path

import numpy as np
import pytest

from rtpaudit.capture import open_recordings
from rtpaudit.capture.frames import Frames
from rtpaudit.decode import Decoder, Packets, path
from rtpaudit.decode.layers import RARE
from tests.decode.made import Row, frames_of, rows_of
from tests.decode.specimens import CARRIERS, SPECIMENS, UNKNOWN_TO_SCAPY
from tests.naive.dissection import Dissected, by_dpkt, by_scapy

ROOT = Path(__file__).parents[2]
CAPTURES = [*sorted((ROOT / "fixtures" / "captures").glob("*.pcap*")), ROOT / "rtpaudit" / "demo" / "demo.pcap"]
COLUMNS = (
    "frame",
    "time_ns",
    "interface",
    "flow",
    "kind",
    "start",
    "length",
    "captured",
    "dscp",
    "ttl",
    "ip_id",
    "vlan",
)
DISSECTED_FRAMES = 250
"""Frames from the front of each fixture that go to the other dissectors, which take a quarter of a millisecond each."""


def frames_in(capture: Path) -> list[Frames]:
    return [frames for recording in open_recordings([capture]) for file in recording.files for frames in file.batches()]


def decode_all(batches: Sequence[Frames]) -> tuple[Decoder, list[Packets]]:
    decoder = Decoder()
    packets = [one for frames in batches for one in decoder.decode(frames, "one.pcap")]
    return decoder, packets + decoder.finish()


def all_slow(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let every frame start on the slow path."""
    monkeypatch.setattr(path, "starting_layer", lambda _number: RARE)


def assert_same(one: Sequence[Packets], other: Sequence[Packets]) -> None:
    assert [len(packets) for packets in one] == [len(packets) for packets in other]
    for mine, theirs in zip(one, other, strict=True):
        for column in COLUMNS:
            np.testing.assert_array_equal(getattr(mine, column), getattr(theirs, column), err_msg=column)


@pytest.mark.parametrize("capture", CAPTURES, ids=lambda file: file.name)
def test_both_paths_agree_on_every_packet_of_every_fixture(capture: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    batches = frames_in(capture)
    fast, fast_packets = decode_all(batches)
    all_slow(monkeypatch)
    slow, slow_packets = decode_all(batches)
    assert sum(map(len, fast_packets)) > 0
    assert_same(fast_packets, slow_packets)
    assert fast.skipped == slow.skipped
    for mine, theirs in zip(asdict(fast.flows).values(), asdict(slow.flows).values(), strict=True):
        np.testing.assert_array_equal(mine, theirs)


@pytest.mark.parametrize("name", sorted((SPECIMENS | CARRIERS).keys() - UNKNOWN_TO_SCAPY))
def test_both_paths_agree_on_every_specimen(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    link_type, frame = (SPECIMENS | CARRIERS)[name]
    batches = [frames_of([frame], link_type)]
    _, fast = decode_all(batches)
    all_slow(monkeypatch)
    _, slow = decode_all(batches)
    assert [len(packets) for packets in fast] == [1]
    assert_same(fast, slow)


def dissected(row: Row | None) -> Dissected | None:
    if row is None:
        return None
    fields = asdict(row)
    del fields["frame"], fields["kind"]
    return Dissected(**fields)


def assert_others_agree(frames: Frames, other: Callable[[bytes, int, int], Dissected | None]) -> None:
    decoder, packets = decode_all([frames])
    rows = {row.frame: row for row in rows_of(packets, decoder.flows)}
    for index in range(min(len(frames), DISSECTED_FRAMES)):
        start, captured, original = (int(column[index]) for column in (frames.start, frames.captured, frames.original))
        octets = frames.octets[start : start + captured].tobytes()
        link_type = frames.interfaces[frames.interface[index]].link_type
        frame = index + frames.first_number
        assert dissected(rows.get(frame)) == other(octets, original, link_type), f"frame {frame}"


@pytest.mark.parametrize("capture", CAPTURES, ids=lambda file: file.name)
def test_scapy_dissects_the_same_out_of_the_fixtures(capture: Path) -> None:
    assert_others_agree(frames_in(capture)[0], by_scapy)


@pytest.mark.parametrize("capture", CAPTURES, ids=lambda file: file.name)
def test_dpkt_dissects_the_same_out_of_the_fixtures(capture: Path) -> None:
    assert_others_agree(frames_in(capture)[0], lambda octets, _original, link_type: by_dpkt(octets, link_type))


# scapy does not look behind an authentication header.
@pytest.mark.parametrize("name", sorted(SPECIMENS.keys() - {"an authentication header"}))
def test_scapy_dissects_the_same_out_of_the_specimens(name: str) -> None:
    link_type, frame = SPECIMENS[name]
    assert_others_agree(frames_of([frame], link_type), by_scapy)
