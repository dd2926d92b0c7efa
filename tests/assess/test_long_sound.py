"""Sound of hours, which lies in files, beside short sound, which does not."""

import numpy as np
import pytest

from rtpaudit.assess import ear, long_sound
from rtpaudit.assess.ear import heard_samples
from rtpaudit.assess.laying import lay_out, sent_samples
from rtpaudit.assess.long_sound import silence
from rtpaudit.assess.sound import keep_time
from tests.craft import rtp
from tests.media.datagrams import talk


@pytest.fixture(params=["memory", "file", "no room"])
def room(request, monkeypatch):
    if request.param != "memory":
        monkeypatch.setattr(long_sound, "MOST_IN_MEMORY", 100)
    if request.param == "no room":
        monkeypatch.setattr(long_sound.os, "posix_fallocate", refuse)


def refuse(*_: int) -> None:
    raise OSError(28, "No space left on device")


@pytest.mark.usefixtures("room")
def test_silence_is_zeros_that_may_be_written_to():
    made = silence(200, 2)
    assert (made.shape, made.dtype, made.any()) == ((200, 2), np.int16, False)
    made[7, 1] = 3
    assert made.sum() == 3
    assert silence(0).shape == (0,)


@pytest.mark.usefixtures("room")
@pytest.mark.parametrize("skew_ppm", [2000.0, -2000.0])
def test_a_sender_is_kept_in_time_by_single_quiet_samples(skew_ppm):
    samples = np.random.default_rng(4).integers(-9000, 9000, 8000).astype(np.int16)
    samples[200::500] = 0
    kept = keep_time(samples, skew_ppm)
    quiet = 200 + 500 * np.arange(16)
    other = np.delete(samples, quiet) if skew_ppm > 0 else np.insert(samples, quiet, 0)
    assert kept.tolist() == other.tolist()


@pytest.mark.usefixtures("room")
def test_long_comfort_noise_is_as_loud_throughout(monkeypatch):
    monkeypatch.setattr(ear, "NOISE_AT_ONCE", 3000)
    made = talk(range(50))
    made.add(1000.0, rtp(bytes([40]), 50, 8000, payload_type=13))
    made.rows += talk(range(51, 60), start_ms=9000.0, first_ticks=72_000).rows
    (stream,) = made.streams()
    laid = lay_out(stream)
    sent = sent_samples(stream, laid, [made.packets().octets])
    octets = [made.packets().octets]
    heard = heard_samples(stream, None, sent, laid.rows, laid.position, laid.rate_hz, octets, conceals_loss=True)
    level = 20 * np.log10(np.sqrt(np.mean((heard[8000:72_000].astype(float) / 32768).reshape(-1, 8000) ** 2, axis=1)))
    assert level == pytest.approx(np.full(8, -40.0), abs=0.5)
    assert len({tuple(part) for part in heard[8000:71_000].reshape(-1, 3000).tolist()}) == 21
