import numpy as np
import pytest

from rtpaudit.playout import concealment
from rtpaudit.playout.concealment import conceal, conceal_runs
from tests.naive import concealment as naive
from tests.published import published_rows

PRINTED = {row["id"]: row for row in published_rows("codec_levels")}


def constant(name):
    return float(PRINTED[f"PLC-{name}"]["expected"])


def tone(hz, samples=8000, peak=8000.0):
    return np.round(peak * np.sin(2 * np.pi * hz * np.arange(samples) / 8000)).astype(np.int16)


def voice(seed, samples=8000):
    """Something like speech: a drifting pitch with overtones, gaps and noise."""
    rng = np.random.default_rng(seed)
    at = np.arange(samples) / 8000
    phase = 2 * np.pi * np.cumsum(110 + 60 * np.sin(2 * np.pi * 0.7 * at + seed)) / 8000
    voiced = sum(np.sin(k * phase + rng.uniform(0, 6)) / k for k in range(1, 9))
    envelope = np.clip(np.sin(2 * np.pi * 1.5 * at + seed), 0, 1)
    return np.round(6000 * voiced * envelope + rng.normal(0, 60, samples)).astype(np.int16)


def test_the_constants_are_the_printed_ones():
    """ITU-T G.711 Appendix I (09/1999)."""
    assert concealment.FRAME / 8 == constant("frame_ms")
    assert concealment.HISTORY / 8 == constant("history_ms")
    assert concealment.WINDOW / 8 == constant("correlation_window_ms")
    assert concealment.QUARTER_MAX / 8 == constant("output_delay_ms")
    assert constant("pitch_min_samples") == concealment.PITCH_MIN
    assert constant("pitch_max_samples") == concealment.PITCH_MAX
    assert concealment.END_OVERLAP / 8 == constant("end_OLA_increment_ms")
    assert concealment.AUDIBLE_FRAMES * 10 == constant("silence_after_ms")
    assert float(concealment.ATTENUATION) == pytest.approx(constant("attenuation_per_frame"))


@pytest.mark.parametrize("frame", range(1, 8))
def test_a_long_loss_of_a_tone_fades_as_printed(frame):
    row = PRINTED[f"PLC-GAIN-{frame}"]
    lost = np.zeros(100, bool)
    lost[50:58] = True
    heard = conceal(tone(200), lost)[80 * (49 + frame) :][:80].astype(float)
    gain = np.sqrt((heard**2).mean()) / (8000 / np.sqrt(2))
    assert gain == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


def test_what_is_far_from_a_loss_is_left_alone():
    lost = np.zeros(100, bool)
    lost[50:53] = True
    sent = voice(1)
    heard = conceal(sent, lost)
    np.testing.assert_array_equal(heard[: 80 * 50 - 30], sent[: 80 * 50 - 30])
    np.testing.assert_array_equal(heard[80 * 54 :], sent[80 * 54 :])


def test_without_a_loss_nothing_changes():
    np.testing.assert_array_equal(conceal(voice(2), np.zeros(100, bool)), voice(2))
    assert len(conceal(np.empty(0, np.int16), np.zeros(0, bool))) == 0


def test_a_short_loss_of_a_steady_tone_cannot_be_heard():
    lost = np.zeros(100, bool)
    lost[50:52] = True
    sent = tone(200)
    error = conceal(sent, lost).astype(float) - sent
    assert np.abs(error[80 * 50 : 80 * 51]).max() < 10


def test_what_stands_in_a_lost_frame_is_not_looked_at():
    lost = np.zeros(100, bool)
    lost[40:47] = True
    scribbled = voice(3)
    scribbled[80 * 40 : 80 * 47] = 32767
    np.testing.assert_array_equal(conceal(scribbled, lost), conceal(voice(3), lost))


@pytest.mark.parametrize("seed", range(8))
def test_each_sample_is_that_of_a_receiver_that_goes_frame_by_frame(seed):
    rng = np.random.default_rng(seed)
    sent = voice(seed)
    lost = rng.random(100) < (0.08, 0.3)[seed % 2]
    lost |= np.roll(lost, 1)
    ours = conceal(sent, lost)
    theirs = np.array(naive.conceal(sent.tolist(), lost.tolist()))
    error = np.abs(ours[: len(theirs)].astype(int) - theirs)
    assert error.max() <= 2  # single against double precision, truncated
    assert (error > 0).mean() < 0.1


def test_a_loss_before_any_sound_is_silent():
    lost = np.zeros(100, bool)
    lost[:4] = True
    heard = conceal(voice(4), lost)
    assert not heard[: 80 * 4].any()


def test_full_scale_does_not_wrap_around():
    sent = np.full(8000, -32768, np.int16)
    lost = np.zeros(100, bool)
    lost[50:57:2] = True
    assert conceal(sent, lost)[:4800].max() <= -32760  # weights of single precision, truncated


def test_losses_may_begin_and_end_anywhere():
    sent = voice(5)
    begin, end = np.array([1003, 1900, 7990]), np.array([1403, 1901, 9000])
    heard = conceal_runs(sent, begin, end)
    shifted = np.concatenate([sent[1003 - 960 :], np.zeros(43, np.int16)])
    lost = np.zeros(100, bool)
    lost[12:17] = True
    np.testing.assert_array_equal(heard[1003:1800], conceal(shifted, lost)[960 : 960 + 797])
    np.testing.assert_array_equal(heard[2000:7900], sent[2000:7900])
    assert len(heard) == len(sent)


def test_a_partial_last_frame_goes_on_where_it_was_cut():
    """200 Hz has 40 samples a period, so a concealed stretch of 60 samples must end in phase."""
    sent = tone(200)
    heard = conceal_runs(sent, np.array([4000]), np.array([4060]))
    assert np.abs(heard.astype(int) - sent).max() < 10


def test_losses_with_hardly_anything_between_them_do_no_harm():
    begin = np.arange(100, 7000, 100)
    heard = conceal_runs(voice(6), begin, begin + 95)
    assert len(heard) == 8000
    np.testing.assert_array_equal(conceal_runs(voice(6), np.array([500]), np.array([500])), voice(6))
