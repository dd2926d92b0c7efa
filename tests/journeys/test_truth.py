"""Whole audits of real captures against what was counted beside them with another reader (dpkt)."""

import json
from pathlib import Path

import numpy as np
import pytest
import soundfile

import rtpaudit

FIXTURES = Path(__file__).parents[2] / "fixtures"
CAPTURES = FIXTURES / "captures"
TRUTHS = {path.name.removesuffix(".truth.json"): json.loads(path.read_text()) for path in CAPTURES.glob("*.truth.json")}
JITTER_MS = 0.002
"""truths are rounded to a ten-thousandth; capture times to a microsecond"""


@pytest.fixture(scope="module")
def audits():
    return {name: rtpaudit.audit(CAPTURES / truth["file"]) for name, truth in TRUTHS.items()}


def rows_of(audit, truth):
    """Pairs of a row of the streams table and the truth of the same stream."""
    streams = audit.streams
    keyed = {
        (f"{row.source}:{row.source_port}", f"{row.destination}:{row.destination_port}", row.ssrc): row
        for row in streams.itertuples()
    }
    return [(keyed.pop((one["src"], one["dst"], one["ssrc"])), one) for one in truth["streams"]], keyed


@pytest.mark.parametrize("name", sorted(TRUTHS))
def test_every_packet_is_accounted_for(audits, name):
    pairs, more = rows_of(audits[name], TRUTHS[name])
    assert more == {}
    for row, truth in pairs:
        assert row.packets_captured == truth["packets"]
        assert row.packets_received == truth["distinct"]
        assert row.packets_expected == truth["expected"]
        assert row.packets_lost == truth["lost"]
        assert row.packets_duplicated == truth["duplicates"]
        assert row.packets_reordered == truth["reordered"]
        assert row.sequence_gaps == truth["loss_runs"]["count"]
        assert row.longest_gap_packets == truth["loss_runs"]["max"]
        assert row.segments == 1


@pytest.mark.parametrize("name", sorted(TRUTHS))
def test_the_missing_numbers_are_those_that_are_missing(audits, name):
    gaps = audits[name].gaps
    for row, truth in rows_of(audits[name], TRUTHS[name])[0]:
        expected = []
        for run in truth["missing"]:
            first, _, last = str(run).partition("-")
            expected.append((int(first), int(last or first) - int(first) + 1))
        mine = gaps[gaps.stream == row.stream]
        assert sorted(zip(mine.first_missing, mine.packets_missing, strict=True)) == sorted(expected)


@pytest.mark.parametrize("name", sorted(TRUTHS))
def test_jitter_is_that_of_rfc_3550(audits, name):
    for row, truth in rows_of(audits[name], TRUTHS[name])[0]:
        jitter = truth["jitter"]["audio_only"]
        assert row.jitter_ms == pytest.approx(jitter["mean_ms"], abs=JITTER_MS)
        assert row.jitter_max_ms == pytest.approx(jitter["max_ms"], abs=JITTER_MS)
        assert row.jitter_last_ms == pytest.approx(jitter["final_ms"], abs=JITTER_MS)


@pytest.mark.parametrize("name", sorted(TRUTHS))
def test_windows_add_up_to_their_stream(audits, name):
    audit = audits[name]
    sums = audit.windows.groupby("stream")[["packets_expected", "packets_lost"]].sum()
    for row in audit.streams.itertuples():
        assert tuple(sums.loc[row.stream]) == (row.packets_expected, row.packets_lost)


@pytest.mark.parametrize(
    ("name", "ssrc"),
    [
        ("clean-pcmu-udp.a", "112fa4b5"),
        ("clean-pcmu-udp.a", "b69d9e6b"),
        ("level-tone1004-pcmu.b", "2dd3d6df"),
        ("hold-resume.a", "6e7ac09d"),
    ],
)
def test_the_decoded_sound_is_that_of_libsndfile(audits, name, ssrc):
    expected, rate = soundfile.read(FIXTURES / "audio" / f"{name}.{ssrc}.wav", dtype="int16")
    streams = audits[name].streams
    (stream,) = streams.stream[streams.ssrc == f"0x{ssrc}"]
    assert rate == 8000
    assert np.array_equal(audits[name].samples(stream), expected)


@pytest.mark.parametrize(
    "name", ["no-rtp-quic-over-ppp.pcap", "no-rtp-dns-two-interfaces.pcapng", "no-rtp-portmapper.pcapng.gz"]
)
def test_other_traffic_is_no_stream(name):
    assert len(rtpaudit.audit(CAPTURES / name).streams) == 0


def test_two_directions_without_signalling_are_one_call():
    audit = rtpaudit.audit(CAPTURES / "pcmu-dtmf-two-way.pcap")
    assert audit.streams.packets_captured.tolist() == [267, 365]
    assert audit.calls.streams.tolist() == [2]
