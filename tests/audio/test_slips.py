import numpy as np
import pytest

from rtpaudit.audio.repeated_frames import repeated_frames
from rtpaudit.audio.slips import SLIP_S, slip_interval_s, slips_of, slips_per_day
from tests.audio.sounds import RATE, noise, reader, rows_of, silence, sine, through, to_int16


def slipped(samples, every, repeat):
    """One sample repeated, or dropped, every so many; and the places."""
    parts = [samples[k : k + every] for k in range(0, len(samples), every)]
    parts = [np.append(one, one[-1]) if repeat else one[:-1] for one in parts[:-1]] + parts[-1:]
    return np.concatenate(parts), np.cumsum([len(one) for one in parts[:-1]])


def long_reader():
    """A minute of speech that does not repeat: the reader at five levels, forwards and backwards."""
    samples = reader().astype(float)
    return to_int16(*(gain * samples[::way] for gain, way in ((1, 1), (0.7, -1), (1.4, 1), (0.5, -1), (1.2, 1))))


@pytest.mark.parametrize("row", rows_of("timing_slips.csv", "SLIP-"), ids=lambda row: row["id"])
def test_slips_follow_from_the_difference_of_the_clocks(row):
    given = row["inputs"].split()[0]
    if row["id"] == "SLIP-72":
        assert slip_interval_s(2e-11 * 1e6) / 86400 == pytest.approx(float(row["expected"]), rel=0.001)
        return
    ppm = float(given) * (1 if "ppm" in row["inputs"] else 1e6)
    ours = slip_interval_s(ppm) if row["quantity"].startswith("seconds") else slips_per_day(ppm)
    assert ours == pytest.approx(float(row["expected"]), rel=0.001)


def test_clocks_in_step_do_not_slip():
    assert slip_interval_s(0.0) == float("inf")
    assert slips_per_day(0.0) == 0
    assert slip_interval_s(-100.0) == pytest.approx(1.25)
    assert SLIP_S == float(rows_of("timing_slips.csv", "frame_us")[0]["expected"]) * 1e-6


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("repeat", [True, False])
@pytest.mark.parametrize("hz", [(425,), (1004,), (350, 440)])
def test_most_slips_in_a_tone_are_found_at_their_places(law, repeat, hz):
    tone = to_int16(sum(sine(one, 30, -18) for one in hz))
    samples, places = slipped(tone, 10_007, repeat)
    found = slips_of(through(law, samples), RATE)
    count = found.repeated if repeat else found.dropped
    assert 0.5 * len(places) <= count <= len(places)
    assert (found.dropped if repeat else found.repeated) == 0
    assert found.interval_s == pytest.approx(10_007 / RATE, rel=0.001)
    assert found.regular
    assert all(np.abs(places / RATE - at).min() < 0.003 for at in found.at_s)


def test_samples_repeated_in_speech_give_the_interval_of_the_slips():
    samples, places = slipped(long_reader(), 10_000, True)
    found = slips_of(through("PCMU", samples), RATE)
    assert found.regular
    assert found.interval_s == pytest.approx(10_001 / RATE, rel=0.002)
    assert 4 <= found.repeated <= len(places)
    assert found.confidence_pct > 90


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize(
    "sound",
    [
        long_reader(),
        sine(1004, 20, -16),
        sine(1000, 20, -30),
        sine(440, 20, -20) + sine(480, 20, -20),
        noise(20, -20),
        silence(5),
    ],
    ids=["speech", "1004 Hz", "1 kHz", "ringing", "noise", "silence"],
)
def test_sound_without_slips_has_none(law, sound):
    assert slips_of(through(law, to_int16(sound)), RATE) is None


def test_joins_at_the_edges_of_packets_are_no_slips():
    tone = to_int16(sine(1004, 20, -18))
    cut = np.concatenate([tone[k : k + 160] for k in range(0, len(tone), 161)])
    assert slips_of(cut, RATE).dropped > 100
    assert slips_of(cut, RATE, packet_samples=160) is None


def test_what_was_not_received_is_no_slip():
    tone = to_int16(sine(1004, 20, -18))
    received = np.ones(len(tone), np.bool_)
    for first in range(8000, 150000, 8000):
        received[first : first + 160] = False
    assert slips_of(np.where(received, tone, 0).astype(np.int16), RATE, received) is None


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("length", [16, 40, 80, 160, 240])
def test_frames_repeated_as_a_whole_are_found_one_by_one(law, length):
    samples, every = reader(), 4001
    parts = [samples[k : k + every] for k in range(0, len(samples), every)]
    loud = sum(np.abs(one[-length:].astype(int)).min() > 0 and np.std(one[-length:]) > 400 for one in parts[:-1])
    stuttering = through(law, np.concatenate([np.append(one, one[-length:]) for one in parts]))
    found = repeated_frames(stuttering, RATE)
    assert len(found) >= 0.8 * loud
    ends = np.cumsum([len(one) + length for one in parts]) - length
    assert all(np.abs(ends - place).min() <= 8 for place in found)
    assert slips_of(stuttering, RATE).repeated_frames == len(found)


@pytest.mark.parametrize(
    "sound",
    [
        reader(),
        0.05 * reader(),
        sine(1004, 10, -50),
        sine(1004, 10, -16),
        sine(125, 10, -20),
        noise(10, -20),
        silence(3),
    ],
    ids=["speech", "faint speech", "faint tone", "tone", "low tone", "noise", "silence"],
)
def test_nothing_else_repeats_frames(sound):
    for law in ("PCMU", "PCMA"):
        assert len(repeated_frames(through(law, to_int16(sound)), RATE)) == 0


def test_a_frame_of_which_part_was_not_received_is_no_repetition():
    samples = reader()
    stuttering = np.concatenate([samples[:16000], samples[15840:16000], samples[16000:]])
    received = np.ones(len(stuttering), np.bool_)
    assert repeated_frames(stuttering, RATE, received).tolist() == pytest.approx([16000], abs=7)
    received[16000:16160] = False
    assert len(repeated_frames(stuttering, RATE, received)) == 0


@pytest.mark.parametrize("count", [0, 1, 100, 801])
def test_little_sound_has_no_slips(count):
    assert slips_of(reader()[4000 : 4000 + count], RATE) is None
