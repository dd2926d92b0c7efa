"""Sound measures of whole captures: levels of a test tone, encryption, digits, and what is left out without sound."""

from pathlib import Path

import numpy as np
import pytest

import rtpaudit

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"


def test_the_test_tone_has_the_level_it_was_made_with():
    """A sine of peak 7168 is -10.00 dBm0 in mu-law: 20 log (7168 / 32636) + 3.17 (ITU-T G.711)."""
    audit = rtpaudit.audit(CAPTURES / "level-tone1004-pcmu.b.pcap")
    (stream,) = audit.assessment.streams
    (tone,) = stream.sound.steady_tones
    assert tone.frequency_hz == pytest.approx(1004, abs=0.5)
    assert tone.level_dbm0 == pytest.approx(-10.0, abs=0.1)
    assert audit.streams.speech_level_dbov[0] == pytest.approx(-16.2, abs=0.1)


def test_encrypted_payload_is_known_from_its_octets_alone():
    audit = rtpaudit.audit(CAPTURES / "srtp-sdes.b.pcap")
    assert all(one.signs.encrypted for one in audit.assessment.streams)
    assert audit.streams.encrypted.all()
    assert audit.streams.rating_note.str.contains("encrypted").all()
    assert audit.streams.speech_level_dbov.isna().all()


def test_speech_is_neither_encrypted_nor_of_the_wrong_law():
    audit = rtpaudit.audit(CAPTURES / "clean-pcmu-udp.a.pcap")
    assert not audit.streams.encrypted.any()
    assert [one.sound.law.law.value for one in audit.assessment.streams] == ["right", "right"]
    assert audit.streams.activity_pct.between(40, 80).all()


def test_windows_carry_activity_and_level():
    audit = rtpaudit.audit(CAPTURES / "level-tone1004-pcmu.b.pcap")
    windows = audit.windows[:-1]
    assert windows.level_dbov.to_numpy() == pytest.approx(np.full(len(windows), -16.2), abs=0.1)
    assert (windows.activity_pct > 98).all()


def test_figures_of_the_packets_are_the_same_without_sound():
    whole = rtpaudit.audit(CAPTURES / "loss3-random.b.pcap")
    bare = rtpaudit.audit(CAPTURES / "loss3-random.b.pcap", sound=False)
    kept = ["packets_lost", "jitter_ms", "burst_ratio", "packets_discarded", "r_factor", "one_way_delay_ms"]
    assert bare.streams[kept].equals(whole.streams[kept])
    assert bare.streams.speech_level_dbov.isna().all()


def test_causes_are_not_looked_for_where_only_figures_are_wanted():
    bare = rtpaudit.audit(CAPTURES / "loss3-random.b.pcap", sound=False, findings=False)
    assert len(bare.findings) == 0
    assert bare.calls.headline.isna().all()
    assert len(rtpaudit.audit(CAPTURES / "loss3-random.b.pcap", sound=False).findings) > 0
