import subprocess

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.audio.level import (
    DBM0_AT_0_DBOV,
    SILENCE_DBOV,
    dbm0,
    dbov,
    level_difference_db,
    level_of,
    noise_level_dbov,
    speech_level,
    window_levels,
)
from rtpaudit.audio.scan import scan
from rtpaudit.codecs import g711
from tests.audio.sounds import RATE, inputs_of, noise, reader, rows_of, silence, sine, through, to_int16
from tests.naive import audio as naive

FIELD = {"long_term": "long_term_dbov", "active_level": "active_dbov", "activity": "activity_pct"}


def bursts(row):
    given = inputs_of(row)
    rate, rms = int(given["rate"]), float(given["on_rms_dBov"])
    burst = [sine(float(given["tone_Hz"]), float(given["on_s"]), rms, rate), silence(float(given["off_s"]), rate)]
    return to_int16(*(burst * int(given["repeats"]))), rate


@pytest.mark.parametrize(
    "row", [row for row in rows_of("sound_levels.csv", "P56-") if "tone_Hz" in row["inputs"]], ids=lambda row: row["id"]
)
def test_p56_measures_the_published_tone_bursts(row):
    measured = speech_level(*bursts(row))
    field = next(field for start, field in FIELD.items() if row["quantity"].startswith(f"P56_{start}"))
    assert getattr(measured, field) == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


@pytest.mark.parametrize("row", rows_of("sound_levels.csv", "C-"), ids=lambda row: row["id"])
def test_dbm0_and_dbov_are_as_far_apart_as_the_overload_points_say(row):
    encoding = row["inputs"].split("=")[1]
    assert dbm0(-20.0, encoding.replace(".", "")) + 20.0 == pytest.approx(float(row["expected"]), abs=0.005)
    assert np.isnan(dbm0(-20.0, "opus"))
    assert set(DBM0_AT_0_DBOV) == {"PCMU", "PCMA", "G722"}


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
def test_the_digital_milliwatt_is_0_dbm0(law):
    table = {row["id"]: row for row in rows_of("sound_levels.csv", f"DMW-{law}")}
    octets = bytes.fromhex(table[f"DMW-{law}-SEQ"]["expected"])
    decode = {"PCMU": g711.decode_pcmu, "PCMA": g711.decode_pcma}[law]
    level = speech_level(np.tile(decode(np.frombuffer(octets, np.uint8)), 2000), RATE).long_term_dbov
    assert level == pytest.approx(float(table[f"DMW-{law}-DBOV"]["expected"]), abs=0.005)
    # For mu-law the overload is 32636, not 32768: 0.035 dB.
    assert dbm0(level, law) == pytest.approx(float(table[f"DMW-{law}-DBM0"]["expected"]), abs=0.04)


def test_full_scale_has_the_published_levels():
    published = {
        row["id"]: float(row["expected"]) for row in rows_of("sound_levels.csv", "SINE-FS", "SQUARE-FS", "IDLE")
    }
    square = np.tile(np.array([-32768, 32767], np.int16), 8000)
    assert speech_level(square, RATE).long_term_dbov == pytest.approx(published["SQUARE-FS"], abs=0.005)
    full = to_int16(sine(1004, 2, -3.0103))
    assert speech_level(full, RATE).long_term_dbov == pytest.approx(published["SINE-FS"], abs=0.005)
    idle = g711.decode_pcma(np.full(16000, 0xD5, np.uint8))
    assert speech_level(idle, RATE).long_term_dbov == pytest.approx(published["IDLE-PCMA"], abs=0.001)


def random_speech(seed, pieces):
    random = np.random.default_rng(seed)
    parts = [random.normal(0, 10 ** random.uniform(0, 4.2), random.integers(1, 1500)) for _ in range(pieces)]
    return random, to_int16(*parts)


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32), st.integers(1, 8), st.booleans(), st.sampled_from([8000, 16000]))
def test_p56_agrees_with_fifteen_counters(seed, pieces, masked, rate):
    random, samples = random_speech(seed, pieces)
    received = None
    if masked:
        received = np.repeat(random.random(len(samples) // 160 + 1) > 0.3, 160)[: len(samples)]
        received[: len(samples) // 5] = False
    ours = speech_level(samples, rate, received)
    theirs = naive.active_level(samples.tolist(), rate, None if received is None else received.tolist())
    assert (ours.active_dbov, ours.activity_pct, ours.long_term_dbov) == pytest.approx(
        (theirs[0], np.minimum(100.0, theirs[1]), theirs[2]), abs=1e-6, nan_ok=True
    )


def test_speech_does_not_get_softer_when_packets_are_lost():
    samples = reader()
    whole = speech_level(samples, RATE)
    received = np.repeat(np.random.default_rng(4).random(len(samples) // 160) > 0.1, 160)
    lossy = np.where(received, samples, 0).astype(np.int16)
    assert speech_level(lossy, RATE, received).active_dbov == pytest.approx(whole.active_dbov, abs=0.15)
    assert speech_level(lossy, RATE).active_dbov < whole.active_dbov - 0.3


def test_a_long_pause_in_which_nothing_is_sent_is_a_pause():
    talk, pause = to_int16(noise(4, -26)), np.zeros(6 * RATE, np.int16)
    samples = np.concatenate([talk, pause])
    received = np.arange(len(samples)) < len(talk)
    measured = speech_level(samples, RATE, received)
    assert measured.active_dbov == pytest.approx(-26, abs=0.4)
    assert measured.activity_pct == pytest.approx(100 * (4 + 0.3) / (10 - 0.2), abs=2)


def test_sox_measures_the_same_long_term_level(tmp_path):
    import soundfile

    soundfile.write(tmp_path / "reader.wav", reader(), RATE, subtype="PCM_16")
    said = subprocess.run(["sox", tmp_path / "reader.wav", "-n", "stats"], capture_output=True, text=True, check=True)
    rms = next(line for line in said.stderr.splitlines() if line.startswith("RMS lev dB"))
    assert speech_level(reader(), RATE).long_term_dbov == pytest.approx(float(rms.split()[-1]), abs=0.01)


def test_noise_is_measured_in_the_pauses():
    talk = [noise(2, -20, 1), silence(2), noise(2, -22, 2), silence(2)]
    scanned = scan(to_int16(np.concatenate(talk) + noise(8, -60, 9)), RATE)
    assert noise_level_dbov(scanned, level_of(scanned)) == pytest.approx(-60, abs=0.3)


def test_an_offset_is_no_noise():
    samples = to_int16(np.concatenate([noise(2, -20), noise(2, -60, 3)]) + 300)
    scanned = scan(samples, RATE)
    assert scanned.dc_offset == pytest.approx(300, abs=20)
    assert noise_level_dbov(scanned, level_of(scanned)) == pytest.approx(-60, abs=0.3)


def test_digital_silence_in_the_pauses_is_the_lowest_level_that_can_be_said():
    scanned = scan(to_int16(noise(2, -20), silence(3)), RATE)
    assert noise_level_dbov(scanned, level_of(scanned)) == SILENCE_DBOV
    published = rows_of("sound_levels.csv", "CN-127")[0]
    assert float(published["inputs"].split("=")[1]) == SILENCE_DBOV


def test_noise_so_loud_that_p56_sees_no_pause_is_still_measured():
    samples = reader()
    scanned = scan(to_int16(samples + noise(len(samples) / RATE, -38)), RATE)
    assert noise_level_dbov(scanned, level_of(scanned)) == pytest.approx(-38, abs=0.7)


@pytest.mark.parametrize("sound", [sine(1004, 10, -16), sine(350, 10, -19) + sine(440, 10, -19)])
def test_a_steady_tone_has_no_pauses_to_measure_noise_in(sound):
    scanned = scan(to_int16(sound + noise(10, -60)), RATE)
    assert np.isnan(noise_level_dbov(scanned, level_of(scanned)))


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("level", [-20, -45, -60])
def test_steady_noise_is_noise_though_p56_takes_it_for_speech(law, level):
    scanned = scan(through(law, to_int16(noise(10, level))), RATE)
    assert level_of(scanned).activity_pct > 95
    assert noise_level_dbov(scanned, level_of(scanned)) == pytest.approx(level, abs=0.5)


def test_windows_add_up_to_the_stream():
    scanned = scan(reader(), RATE)
    level = level_of(scanned)
    windows = window_levels(scanned, level)
    assert len(windows.activity_pct) == len(windows.level_dbov) == 6
    assert windows.activity_pct.mean() == pytest.approx(level.activity_pct, abs=1.5)
    assert dbov(np.mean(32768**2 * 10 ** (windows.level_dbov / 10))) == pytest.approx(level.long_term_dbov, abs=0.01)


def test_windows_tell_talk_from_pause_and_from_nothing():
    samples = to_int16(sine(300, 2, -26), silence(2), sine(300, 2, -30), silence(1.99))
    received = np.arange(len(samples)) < 6 * RATE
    scanned = scan(samples, RATE, received)
    windows = window_levels(scanned, level_of(scanned))
    assert windows.activity_pct == pytest.approx([98.5, 14.0, 98.5, 15.5], abs=2.5)
    assert windows.level_dbov[:3] == pytest.approx([-26, SILENCE_DBOV, -30], abs=0.02)
    assert np.isnan(windows.level_dbov[3])


def test_two_sides_differ_by_their_active_levels():
    loud, soft = speech_level(to_int16(noise(3, -18)), RATE), speech_level(to_int16(noise(3, -30)), RATE)
    assert level_difference_db(loud, soft) == pytest.approx(12, abs=0.1)
    assert np.isnan(level_difference_db(loud, speech_level(np.zeros(8000, np.int16), RATE)))


def test_nothing_at_all_is_neither_active_nor_silent():
    empty = np.empty(0, np.int16)
    level = speech_level(empty, RATE)
    assert np.isnan([level.active_dbov, level.activity_pct, level.long_term_dbov]).all()
    assert len(window_levels(scan(empty, RATE), level).level_dbov) == 0
    unheard = scan(np.zeros(100, np.int16), RATE, np.zeros(100, np.bool_))
    assert np.isnan(level_of(unheard).long_term_dbov)
    assert np.isnan(noise_level_dbov(unheard, level_of(unheard)))
