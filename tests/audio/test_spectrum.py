import numpy as np
import pytest

from rtpaudit.audio.scan import scan
from rtpaudit.audio.spectrum import band_of, hum_of, spectra_of
from tests.audio.sounds import RATE, noise, reader, silence, sine, through, to_int16


def spectra(samples, rate=RATE, received=None):
    return spectra_of(samples, scan(samples, rate, received))


def mains(hz, seconds, dbov):
    """Hum of a transformer: twice the mains frequency strongest, the level being that of all lines together."""
    lines = [(1, 0.5), (2, 1.0), (3, 0.3)]
    norm = np.sqrt(sum(one**2 for _, one in lines))
    return sum(sine(hz * k, seconds, dbov, phase=k) * part / norm for k, part in lines)


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("hz", [50, 60, 49.9, 60.1])
@pytest.mark.parametrize("dbov", [-40, -50])
def test_hum_under_speech_is_found_with_its_frequency_and_level(law, hz, dbov):
    samples = reader()
    humming = through(law, to_int16(samples + mains(hz, len(samples) / RATE, dbov)))
    found = hum_of(spectra(humming))
    assert found is not None
    assert found.mains_hz == round(hz, -1)
    assert found.level_dbov == pytest.approx(dbov, abs=2.5)
    assert {1, 2} <= set(found.harmonics)
    # At -50 dBov the voice itself, near 120 Hz, is as loud in the quiet seconds.
    assert dbov == -50 or found.strongest_hz == pytest.approx(2 * hz, abs=1)
    assert found.confidence_pct > 60


@pytest.mark.parametrize(
    "sound",
    [
        reader().astype(float),
        reader() + noise(12, -45),
        noise(12, -30),
        sine(1004, 12, -16),
        sine(350, 12, -19) + sine(440, 12, -19),
        sine(480, 12, -19) + sine(620, 12, -19),
        sine(400, 12, -19),
        silence(12),
    ],
    ids=["speech", "noisy speech", "noise", "test tone", "dial tone", "busy tone", "400 Hz", "silence"],
)
def test_other_sounds_do_not_hum(sound):
    for law in ("PCMU", "PCMA"):
        assert hum_of(spectra(through(law, to_int16(sound)))) is None


def test_hum_too_faint_to_hear_is_passed_over():
    assert hum_of(spectra(to_int16(mains(50, 10, -75) + noise(10, -80)))) is None


def test_a_row_adds_up_to_the_power_of_its_second():
    rows = spectra(to_int16(sine(1000, 4, -20)))
    assert rows.shape == (7, 4001)
    assert 10 * np.log10(rows.sum(axis=1)) == pytest.approx(-20, abs=0.05)


def test_energy_beside_the_telephone_band_is_shared_out():
    inside, below, above = sine(1000, 5, -20), sine(200, 5, -26.02), sine(3700, 5, -30)
    band = band_of(spectra(to_int16(inside + below + above)))
    whole = 1 + 10**-0.602 + 0.1
    assert (band.below_pct, band.above_pct) == pytest.approx((100 * 10**-0.602 / whole, 10 / whole), abs=0.2)


def test_the_share_above_the_band_agrees_with_scipy():
    from scipy import signal

    samples = to_int16(noise(20, -20))
    frequency, power = signal.welch(samples.astype(float), RATE, nperseg=2048)
    band = band_of(spectra(samples))
    assert band.above_pct == pytest.approx(100 * power[frequency > 3400].sum() / power.sum(), abs=0.5)
    assert band.below_pct == pytest.approx(100 * power[frequency < 300].sum() / power.sum(), abs=0.5)


def test_an_offset_is_no_energy_below_the_band():
    assert band_of(spectra(to_int16(sine(1000, 5, -30) + 2000))).below_pct < 0.1


def test_seconds_with_losses_are_passed_over():
    samples = to_int16(sine(1000, 5, -20))
    received = np.ones(len(samples), np.bool_)
    received[12000:12160] = False
    assert len(spectra(samples, received=received)) == 7


def test_silence_and_a_short_stream_say_nothing():
    assert np.isnan(band_of(spectra(np.zeros(16000, np.int16))).below_pct)
    assert spectra(np.zeros(7999, np.int16)).shape == (0, 4001)
    assert hum_of(spectra(np.zeros(100, np.int16))) is None


@pytest.mark.parametrize("hz", [50, 60])
def test_the_mains_frequency_counts_without_its_multiples_where_it_stands_out(hz):
    found = hum_of(spectra(to_int16(noise(12, -60) + sine(hz, 12, -40))))
    assert found is not None
    assert (found.mains_hz, found.harmonics) == (hz, (1,))
    assert hum_of(spectra(to_int16(noise(12, -60) + sine(hz, 12, -90)))) is None
