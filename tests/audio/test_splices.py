import numpy as np
import pytest

from rtpaudit.audio.splices import splices_of
from tests.audio.sounds import RATE, noise, reader, silence, sine, through, to_int16


def pieces(samples, sent, every):
    """Pieces of ``sent`` samples, one every ``every``: the rest is left out, or comes twice."""
    return np.concatenate([samples[k : k + sent] for k in range(0, len(samples) - max(sent, every), every)])


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize(
    ("sent", "every"), [(160, 240), (160, 320), (80, 160), (240, 320), (240, 160), (160, 80), (160, 165)]
)
def test_sound_cut_to_another_packet_time_has_joins_at_every_period(law, sent, every):
    found = splices_of(through(law, pieces(reader(), sent, every)), RATE, 160)
    assert found.period_ms == sent / 8
    assert found.offset_ms == pytest.approx(0, abs=0.13)
    assert found.at_packet_edges == (sent == 160)
    assert found.excess_db > 6
    assert found.confidence_pct > 70


def test_joins_may_lie_anywhere_in_a_packet():
    found = splices_of(pieces(reader(), 160, 240)[50:], RATE, 160)
    assert found.offset_ms == pytest.approx((160 - 50) / 8, abs=0.13)
    assert not found.at_packet_edges


@pytest.mark.parametrize(
    "sound",
    [reader(), reader() + noise(12, -40), sine(1004, 10, -16), sine(1000, 10, -16), noise(10, -20), silence(3)],
    ids=["speech", "noisy speech", "1004 Hz", "1 kHz", "noise", "silence"],
)
def test_sound_that_goes_on_has_no_joins(sound):
    for law in ("PCMU", "PCMA"):
        assert splices_of(through(law, to_int16(sound)), RATE, 160) is None


def test_losses_make_no_joins_where_they_are_known():
    samples = reader()
    received = np.repeat(np.arange(600) % 5 != 0, 160)
    assert splices_of(np.where(received, samples, 0).astype(np.int16), RATE, 160, received) is None


@pytest.mark.parametrize("count", [0, 1, 1000])
def test_little_sound_tells_nothing(count):
    assert splices_of(reader()[:count], RATE, 160) is None
