import numpy as np
import pytest

from rtpaudit.codecs.comfort_noise import ORDER_MAX, ComfortNoise, generate
from rtpaudit.errors import MalformedPacket
from tests.published import published_rows

PRINTED = {row["id"]: row for row in published_rows("codec_levels")}


@pytest.mark.parametrize(("row", "octet"), [("CN-0", 0x00), ("CN-127", 0x7F), ("CN-MSB", 0xB0)])
def test_the_level_is_read_as_printed(row, octet):
    """RFC 3389, 3.1: seven bits of -dBov."""
    expected = abs(float(PRINTED[row]["expected"]))
    assert ComfortNoise.parse(bytes([octet])).level_dbov == -expected


@pytest.mark.parametrize(("row", "index"), [("CN-REFL", 0), ("CN-REFL254", 254)])
def test_a_coefficient_is_read_as_printed(row, index):
    """RFC 3389, 3.2."""
    noise = ComfortNoise.parse(bytes([50, index, 127]))
    assert noise.reflection[0] == pytest.approx(float(PRINTED[row]["expected"]), abs=1e-6)
    assert noise.reflection[1] == 0.0


def test_an_empty_payload_is_refused_and_a_long_one_cut():
    with pytest.raises(MalformedPacket, match="needs 1 for its level"):
        ComfortNoise.parse(b"")
    assert len(ComfortNoise.parse(bytes(1400)).reflection) == ORDER_MAX
    assert ComfortNoise.parse(bytes([30, 255])).reflection == (0.0,)


@pytest.mark.parametrize("indices", [(), (60,), (40, 200), (60, 150, 120, 127, 140, 110, 130, 125)])
@pytest.mark.parametrize("level", [20, 45, 70])
def test_noise_has_the_level_that_was_sent_whatever_its_spectrum(level, indices):
    noise = ComfortNoise.parse(bytes([level, *indices]))
    samples = generate([noise], np.array([80_000])).astype(float)
    dbov = 20 * np.log10(np.sqrt((samples**2).mean()) / 32768)
    assert dbov == pytest.approx(-level, abs=0.3)


def test_noise_has_the_spectrum_that_was_sent():
    """First coefficient k: neighbours correlate by -k (order 1 of Levinson's recursion)."""
    for index in (40, 127, 210):
        noise = ComfortNoise.parse(bytes([30, index]))
        samples = generate([noise], np.array([80_000])).astype(float)
        correlation = (samples[1:] * samples[:-1]).mean() / (samples**2).mean()
        assert correlation == pytest.approx(-noise.reflection[0], abs=0.02)


def test_a_spectrum_of_higher_order_is_that_of_its_prediction_filter():
    """Step-up recursion from the coefficients, then the filter undone: what is left is white."""
    noise = ComfortNoise.parse(bytes([20, 60, 170, 110, 140]))
    samples = generate([noise], np.array([200_000])).astype(float)
    filter_ = [1.0]
    for k in noise.reflection:
        longer = [*filter_, 0.0]
        filter_ = [a + k * b for a, b in zip(longer, longer[::-1], strict=True)]
    residual = np.convolve(samples, filter_)[10:-10]
    for lag in range(1, 8):
        assert abs((residual[lag:] * residual[:-lag]).mean() / (residual**2).mean()) < 0.02


def test_each_payload_has_its_stretch_and_the_same_seed_gives_the_same_noise():
    noises = [ComfortNoise(-20.0), ComfortNoise(-60.0, (-0.5,)), ComfortNoise(-127.0)]
    counts = np.array([4000, 4000, 500])
    samples = generate(noises, counts, seed=4)
    assert len(samples) == 8500
    loud, soft = samples[:4000].astype(float).std(), samples[4100:8000].astype(float).std()
    assert 20 * np.log10(loud / soft) == pytest.approx(40, abs=1)
    assert np.abs(samples[8100:]).max() <= 1
    np.testing.assert_array_equal(samples, generate(noises, counts, seed=4))
    assert (samples != generate(noises, counts, seed=5)).any()
    assert len(generate([], np.empty(0, np.int64))) == 0


def test_the_steepest_model_stays_stable():
    noise = ComfortNoise.parse(bytes([0] * (1 + ORDER_MAX)))
    samples = generate([noise], np.array([20_000]))
    assert len(samples) == 20_000  # what is no number would warn, and warnings fail
