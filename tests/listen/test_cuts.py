import numpy as np
import pytest

from rtpaudit.audio.level import level_of
from rtpaudit.audio.scan import scan
from rtpaudit.listen.cuts import Cut, cut_around
from tests.listen.captures import voice

RATE = 8000


def turns(*seconds: float) -> np.ndarray:
    """Speech and faint noise in turn, as long as said; speech first."""
    spoken, draw = voice(60.0, gap_s=0.01), np.random.default_rng(2)
    parts, at = [], 0
    for k, length in enumerate(seconds):
        count = int(length * RATE)
        if k % 2 == 0:
            # Rustling throughout, so that no pause of the voice itself shows.
            parts.append(spoken[at : at + count] // 2 + draw.normal(0.0, 2000.0, count))
            at += count
        else:
            parts.append(draw.normal(0.0, 10.0, count))
    return np.concatenate(parts).astype(np.int16)


def cut(samples: np.ndarray, begin_s: float, end_s: float, aim_s: float = 10.0, **more) -> Cut | None:
    scanned = scan(samples, RATE, more.pop("received", None))
    return cut_around(scanned, level_of(scanned), begin_s, end_s, aim_s, **more)


def test_a_clip_lies_between_two_pauses_around_the_place() -> None:
    # Speech to 4 s, from 5 to 14 s and from 15 s on: 10 s around 9 s fit between the pauses.
    found = cut(turns(4.0, 1.0, 9.0, 1.0, 10.0), 9.0, 11.0)
    assert found is not None
    assert found.in_pauses
    assert 400 < found.begin <= 500
    assert 1400 <= found.end < 1500
    assert 500 - found.begin <= 25


@pytest.mark.parametrize("aim_s", [5.0, 10.0])
@pytest.mark.parametrize("at_s", [0.0, 3.0, 17.0, 31.0, 58.0])
def test_a_clip_holds_its_place_and_has_a_permitted_length(aim_s: float, at_s: float) -> None:
    found = cut(voice(60.0), at_s, at_s + 2.0, aim_s)
    assert found is not None
    assert 0.8 * aim_s <= (found.end - found.begin) / 100 <= 1.2 * aim_s
    assert found.begin <= at_s * 100 + 50
    assert found.end >= at_s * 100 + 150


def test_speech_without_pauses_is_cut_where_it_is_softest() -> None:
    samples = turns(60.0)
    samples[25 * RATE : 25 * RATE + 800] //= 16
    found = cut(samples, 29.0, 31.0)
    assert found is not None
    assert not found.in_pauses
    assert 2495 <= found.begin <= 2515


def test_two_clips_share_no_sound() -> None:
    samples = voice(60.0)
    first = cut(samples, 20.0, 22.0)
    assert first is not None
    second = cut(samples, 24.0, 26.0, taken=[first])
    assert second is None or not second.overlaps([first])
    beyond = cut(samples, 40.0, 42.0, taken=[first])
    assert beyond is not None
    assert not beyond.overlaps([first])


def test_a_loss_is_no_pause() -> None:
    samples, received = turns(60.0), np.ones(60 * RATE, np.bool_)
    samples[25 * RATE : 26 * RATE], received[25 * RATE : 26 * RATE] = 0, False
    found = cut(samples, 29.0, 31.0, received=received)
    assert found is not None
    assert not 2500 <= found.begin < 2600


def test_a_short_stream_is_one_clip_as_it_is() -> None:
    assert cut(voice(9.0), 4.0, 6.0) == Cut(0, 900, True)
    assert cut(voice(11.9), 4.0, 6.0) == Cut(0, 1190, True)
    assert cut(voice(2.5), 0.0, 2.0) is None


def test_where_hardly_anybody_speaks_there_is_no_clip() -> None:
    assert cut(turns(1.0, 40.0, 1.0), 20.0, 22.0) is None
    assert cut(np.zeros(60 * RATE, np.int16), 20.0, 22.0) is None
