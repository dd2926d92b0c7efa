import numpy as np
import pytest

from rtpaudit.audio.scan import scan
from rtpaudit.audio.silence import dead_air, dead_air_together, silent_blocks
from tests.audio.sounds import RATE, noise, silence, sine, to_int16


def spans(passages):
    return [(one.from_s, one.to_s) for one in passages]


def test_dead_air_has_a_start_and_an_end():
    scanned = scan(to_int16(noise(2, -30), silence(4), noise(1, -30), silence(2), noise(1, -30), silence(3.5)), RATE)
    assert spans(dead_air(scanned)) == [(2.0, 6.0), (10.0, 13.5)]
    assert dead_air(scanned)[0].level_dbov == -127
    assert dead_air(scanned)[0].duration_s == 4


def test_comfort_noise_is_not_dead_air_and_the_least_noise_is():
    assert dead_air(scan(to_int16(noise(6, -60)), RATE)) == []
    assert spans(dead_air(scan(to_int16(noise(6, -72)), RATE))) == [(0.0, 6.0)]


def test_a_click_does_not_end_dead_air_and_a_word_does():
    click, word = noise(0.03, -20), noise(0.2, -20)
    assert spans(dead_air(scan(to_int16(silence(2), click, silence(2)), RATE))) == [(0.0, 4.03)]
    assert dead_air(scan(to_int16(silence(2), word, silence(2)), RATE)) == []


def test_an_offset_alone_is_silent():
    assert silent_blocks(scan(np.full(8000, 900, np.int16), RATE)).all()


def test_what_was_not_received_is_silent_and_said_so():
    samples = to_int16(sine(300, 1, -20), silence(4), sine(300, 1, -20))
    received = np.ones(len(samples), np.bool_)
    received[RATE : 5 * RATE] = False
    (passage,) = dead_air(scan(samples, RATE, received))
    assert (passage.from_s, passage.to_s, passage.received_pct) == (1.0, 5.0, 0.0)
    assert np.isnan(passage.level_dbov)


def test_one_side_silent_while_the_other_speaks_is_no_dead_air_of_the_call():
    one = scan(to_int16(noise(3, -30), silence(9), noise(2, -30)), RATE)
    other = scan(to_int16(silence(2), noise(3, -30, 2), silence(9)), RATE)
    assert spans(dead_air_together(one, other, 0.0)) == [(5.0, 12.0)]
    # The other began 2 s later than this one: its speech lies from 4 to 7 s.
    assert spans(dead_air_together(one, other, 2.0)) == [(7.0, 12.0)]
    # It began 4 s before: its speech is over when this one falls silent.
    assert spans(dead_air_together(one, other, -4.0)) == [(3.0, 12.0)]


@pytest.mark.parametrize("lead", [-1000.0, 1000.0])
def test_sides_that_never_overlap_are_each_on_their_own(lead):
    one = scan(to_int16(noise(1, -30), silence(5)), RATE)
    other = scan(to_int16(noise(9, -30)), RATE)
    assert spans(dead_air_together(one, other, lead)) == [(1.0, 6.0)]
