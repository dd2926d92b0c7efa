"""Sound in the page: its place on the axis, and within a single file every sample of it."""

import base64
import io

import numpy as np
import soundfile

from rtpaudit.report.sounds import Place, Sounds
from rtpaudit.report.waveform import Waveforms
from tests.report import made


def sounds(place: Place, **options: tuple[str, ...]) -> Sounds:
    tones = made.Tones(**options)
    return Sounds(tones, Waveforms(tones.heard, 100), place)


def call() -> tuple[made.AssessedCall, made.AssessedStream]:
    there, back = made.stream("s01", clock_skew_ppm=100.0), made.stream("s02", **made.mirrored())
    return made.call("c01", [there], [back]), there


def test_sound_lies_where_its_first_sample_arrived() -> None:
    one, there = call()
    told = sounds("folder").of(there, one)
    assert told["begin"] == 1000.0
    assert told["files"] == {"sent": "c01-s01-sent", "heard": "c01-s01-heard"}


def test_a_fast_sender_s_file_passes_faster_than_the_axis() -> None:
    one, there = call()
    assert sounds("folder").of(there, one)["pace"] == 1.0001
    assert sounds("folder").of(one.from_callee[0], one)["pace"] == 1.0


def test_both_sides_begin_with_the_earlier() -> None:
    one, _ = call()
    assert sounds("folder").both(one) == {"begin": 1000.0, "file": "c01"}


def test_a_stream_that_cannot_be_decoded_has_no_sound() -> None:
    one, there = call()
    source = sounds("folder", without_decoder=("s01",))
    assert source.of(there, one) is None
    assert source.both(one) == {"begin": 2000.0, "file": "c01"}


def test_where_no_sound_is_kept_the_picture_stays() -> None:
    one, there = call()
    told = sounds("nowhere").of(there, one)
    assert told["files"] == {}
    assert told["envelope"]
    assert sounds("nowhere").both(one) is None


def test_within_a_single_file_no_sample_changes() -> None:
    one, there = call()
    texts = sounds("inside").inside(one)
    assert set(texts) == {"c01-s01-sent", "c01-s01-heard", "c01-s02-sent", "c01-s02-heard"}
    samples, rate = soundfile.read(io.BytesIO(base64.b64decode(texts["c01-s01-heard"])), dtype="int16")
    wanted, wanted_rate = made.Tones().heard(there.id)
    np.testing.assert_array_equal(samples, wanted)
    assert rate == wanted_rate
