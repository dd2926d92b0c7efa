import numpy as np
import pytest

from rtpaudit.audio.digits import COLUMNS_HZ, KEYS, ROWS_HZ, digits_of
from rtpaudit.audio.scan import scan
from tests.audio.sounds import RATE, noise, reader, rows_of, silence, sine, through, to_int16

EVERY_KEY = "123A456B789C*0#D"


def press(key, seconds, dbov=-20.0, twist_db=0.0, off=0.0, phase=0.0, rate=RATE):
    row = next(row for row in range(4) if key in KEYS[row])
    column = KEYS[row].index(key)
    low = sine(ROWS_HZ[row] * (1 + off), seconds, dbov - 3 - twist_db / 2, rate, phase)
    return low + sine(COLUMNS_HZ[column] * (1 + off), seconds, dbov - 3 + twist_db / 2, rate, 2 * phase)


def dialled(keys, seconds, pause, floor=-70, rate=RATE, **how):
    random = np.random.default_rng(3)
    parts = [silence(0.1, rate)]
    for key in keys:
        parts += [press(key, seconds, phase=random.uniform(0, 6), rate=rate, **how)]
        parts += [silence(pause + random.uniform(0, 0.01), rate)]
    sound = np.concatenate(parts)
    return to_int16(sound + noise(len(sound) / rate + 1, floor, rate=rate)[: len(sound)])


def heard(samples, rate=RATE):
    return digits_of(samples, scan(samples, rate))


def text(samples, rate=RATE):
    return "".join(one.digit for one in heard(samples, rate))


def test_keys_are_the_sixteen_of_q23():
    """ITU-T Q.23, from memory."""
    assert (ROWS_HZ, COLUMNS_HZ) == ((697, 770, 852, 941), (1209, 1336, 1477, 1633))
    assert "".join(KEYS) == EVERY_KEY


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
def test_digits_of_the_shortest_signal_and_pause_are_accepted(law):
    shortest, pause = (float(row["expected"]) / 1000 for row in rows_of("planning_limits.csv", "DTMF-ON", "DTMF-OFF"))
    assert (shortest, pause) == (0.04, 0.04)
    samples = dialled(EVERY_KEY * 2, shortest, pause)
    found = heard(through(law, samples))
    assert "".join(one.digit for one in found) == EVERY_KEY * 2
    assert np.mean([one.to_s - one.from_s for one in found]) == pytest.approx(shortest, abs=0.004)


def test_the_same_digit_twice_is_two_and_a_short_break_is_none():
    assert text(dialled("77", 0.05, 0.04)) == "77"
    broken = np.concatenate([press("7", 0.06), silence(0.01), press("7", 0.06)])
    assert text(to_int16(silence(0.1), broken, silence(0.1))) == "7"


@pytest.mark.parametrize(
    ("how", "accepted"),
    [
        ({"seconds": 0.023}, False),
        ({"off": 0.015}, True),
        ({"off": -0.015}, True),
        ({"off": 0.035}, False),
        ({"off": -0.035}, False),
        ({"twist_db": 4.0}, True),
        ({"twist_db": -8.0}, True),
        ({"twist_db": 12.0}, False),
        ({"twist_db": -15.0}, False),
        ({"dbov": -31.0}, True),
        ({"floor": -38.0}, True),
    ],
    ids=str,
)
def test_limits_of_a_receiver_hold(how, accepted):
    """ITU-T Q.24, from memory: 23 ms refused; 1.5 % accepted, 3.5 % refused; twist 4 and -8 dB; -25 dBm a tone."""
    keys = text(dialled(EVERY_KEY, **({"seconds": 0.05, "pause": 0.05} | how)))
    assert keys == (EVERY_KEY if accepted else "")


def test_a_digit_has_its_time_level_and_twist():
    (digit,) = heard(to_int16(silence(0.5), press("8", 0.2, -18, twist_db=-3), silence(0.3)))
    assert (digit.from_s, digit.to_s) == pytest.approx((0.5, 0.7), abs=0.006)
    assert digit.twist_db == pytest.approx(-3, abs=0.2)
    assert digit.level_dbov == pytest.approx(-18 + 0.25, abs=0.3)
    assert digit.confidence_pct == 99


def test_digits_at_16_khz_are_the_same():
    assert text(dialled(EVERY_KEY, 0.05, 0.05, rate=16000), 16000) == EVERY_KEY


def test_digits_over_faint_speech_are_heard():
    background = 0.05 * reader().astype(float)
    samples = dialled(EVERY_KEY, 0.1, 0.1)
    assert text(to_int16(samples + background[: len(samples)])) == EVERY_KEY


@pytest.mark.parametrize("gain", [0.5, 1.0, 2.0])
def test_speech_is_not_taken_for_digits(gain):
    assert text(through("PCMU", to_int16(gain * reader().astype(float)))) == ""


@pytest.mark.parametrize(
    "sound",
    [noise(20, -20), silence(5), sine(697, 2, -20), sine(1209, 2, -20), sine(440, 2, -20) + sine(480, 2, -20)],
    ids=["noise", "silence", "row alone", "column alone", "ringing"],
)
def test_other_sounds_are_no_digits(sound):
    assert text(to_int16(sound)) == ""


@pytest.mark.parametrize("count", [0, 79, 239, 300])
def test_the_end_of_the_sound_is_no_trouble(count):
    assert text(to_int16(press("5", 0.1))[:count]) in ("", "5")
