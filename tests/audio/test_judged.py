import numpy as np
import pytest

from rtpaudit.audio.judged import CONTEXT, FRAME, FRAMES, ORDER, errors_of, judged_frames
from tests.audio.sounds import noise, reader, silence, sine, to_int16


def test_errors_are_what_each_filter_leaves_of_its_row():
    random = np.random.default_rng(1)
    x, filters = random.normal(0, 9, (4, 3 * ORDER)), random.normal(0, 1, (4, ORDER + 1))
    expected = [np.convolve(row, filter)[ORDER : 3 * ORDER] for row, filter in zip(x, filters, strict=True)]
    assert errors_of(x, filters) == pytest.approx(np.array(expected))


def test_only_frames_with_predictable_sound_are_judged():
    assert len(judged_frames(reader()).starts) > 200
    assert len(judged_frames(to_int16(noise(5, -20))).starts) == 0
    assert len(judged_frames(to_int16(silence(5))).starts) == 0
    assert len(judged_frames(to_int16(sine(1000, 5, -60))).starts) == 0


def test_a_frame_holds_its_samples_and_those_beside_it():
    judged = judged_frames(reader())
    first = int(judged.starts[0])
    assert judged.x[0].tolist() == reader()[first - ORDER : first + FRAME + ORDER].tolist()
    half = judged.where(np.arange(len(judged.starts)) % 2 == 0)
    assert half.starts.tolist() == judged.starts[::2].tolist()


def test_frames_near_what_was_not_received_are_passed_over():
    received = np.ones(len(reader()), np.bool_)
    received[40000:40160] = False
    starts = judged_frames(reader(), received).starts
    reach = (CONTEXT - FRAME) // 2
    assert not ((starts + FRAME + reach > 40000) & (starts - reach < 40160)).any()
    assert len(starts) > 200


def test_a_long_stream_costs_no_more_than_its_share_of_frames():
    judged = judged_frames(np.tile(to_int16(sine(440, 1, -20)), 1800))
    assert len(judged.starts) == FRAMES
    assert judged.starts[-1] - judged.starts[0] > 1700 * 8000


@pytest.mark.parametrize("count", [0, 10, 2 * CONTEXT])
def test_little_sound_is_not_judged(count):
    assert len(judged_frames(reader()[:count]).starts) == 0
