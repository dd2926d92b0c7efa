import numpy as np
import pytest

from rtpaudit.audio.clipping import clipping_of
from rtpaudit.audio.scan import EXTREMES, scan
from tests.audio.sounds import RATE, noise, reader, sine, through, to_int16


def clipping(samples, law="PCMU"):
    return clipping_of(samples, scan(samples, RATE, encoding=law), *EXTREMES[law])


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("gain", [0.25, 1, 2])
def test_speech_that_fits_is_not_clipped(law, gain):
    found = clipping(through(law, to_int16(gain * reader().astype(float))), law)
    assert found.clipped_pct == 0
    assert np.isnan(found.ceiling_dbov)


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
def test_overdriven_speech_shows_the_samples_at_both_extremes(law):
    loud = to_int16(8.0 * reader().astype(float))
    found = clipping(through(law, loud), law)
    # Whatever is beyond the last decision value of the code is at the extreme: count the samples that were.
    beyond = (np.abs(loud.astype(int)) >= 31744).mean() * 100
    assert 0.8 * beyond < found.clipped_pct <= beyond
    assert found.runs > 300
    assert found.longest_run_samples >= 5


def test_two_neighbours_are_a_clip_and_a_lone_peak_is_none():
    samples = np.zeros(800, np.int16)
    samples[[10, 50, 51, 90, 91, 92]] = 32124
    samples[[200, 201]] = [32124, -32124]
    found = clipping(samples)
    assert (found.runs, found.longest_run_samples) == (2, 3)
    assert found.clipped_pct == pytest.approx(100 * 5 / 800)


def test_a_run_counts_on_over_the_edge_of_a_block():
    samples = np.zeros(800, np.int16)
    samples[78:83] = -32124
    assert (clipping(samples).runs, clipping(samples).longest_run_samples) == (1, 5)


def test_speech_cut_off_before_it_was_encoded_has_a_ceiling():
    cut = through("PCMU", np.clip(to_int16(3.0 * reader().astype(float)), -9000, 9000).astype(np.int16))
    found = clipping(cut)
    assert found.clipped_pct == 0
    assert found.ceiling_dbov == pytest.approx(20 * np.log10(9000 / 32768), abs=0.3)
    assert found.at_ceiling_pct > 2
    assert found.confidence_pct > 80


@pytest.mark.parametrize("sound", [sine(440, 5, -10), sine(1004, 5, -16), noise(5, -20), np.zeros(8000)])
def test_tones_noise_and_silence_have_no_ceiling(sound):
    assert np.isnan(clipping(through("PCMU", to_int16(sound))).ceiling_dbov)
