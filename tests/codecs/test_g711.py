import csv
from io import BytesIO
from pathlib import Path

import numpy as np
import pytest
import soundfile

from rtpaudit.codecs import CODECS, codec_of, decode, g711, sample_table
from rtpaudit.errors import MissingCodec

PUBLISHED = Path(__file__).parents[1] / "published"
CODES = PUBLISHED / "g711_decode.csv"
LEVELS = PUBLISHED / "codec_levels.csv"
DECODERS = {"PCMU": g711.decode_pcmu, "PCMA": g711.decode_pcma}
ENCODERS = {"PCMU": g711.encode_pcmu, "PCMA": g711.encode_pcma}
SNDFILE = {"PCMU": "ULAW", "PCMA": "ALAW"}
EVERY_OCTET = np.arange(256, dtype=np.uint8)
EVERY_SAMPLE = np.arange(-32768, 32768).astype(np.int16)


def rows_of(table):
    with table.open() as file:
        return list(csv.DictReader(file))


def by_libsndfile(law, octets):
    samples, _ = soundfile.read(
        BytesIO(octets.tobytes()),
        dtype="int16",
        format="RAW",
        subtype=SNDFILE[law],
        samplerate=8000,
        channels=1,
    )
    return samples


@pytest.mark.parametrize("law", DECODERS)
def test_all_256_codes_decode_as_printed(law):
    """ITU-T G.711 (11/1988), Tables 1 and 2."""
    rows = [row for row in rows_of(CODES) if row["law"] == law]
    assert len(rows) == 256
    codes = np.array([int(row["code_dec"]) for row in rows], np.uint8)
    np.testing.assert_array_equal(DECODERS[law](codes), [int(row["linear16"]) for row in rows])


@pytest.mark.parametrize("law", DECODERS)
def test_all_256_codes_decode_as_libsndfile_decodes_them(law):
    np.testing.assert_array_equal(DECODERS[law](EVERY_OCTET), by_libsndfile(law, EVERY_OCTET))


@pytest.mark.parametrize(("law", "silence"), [("PCMU", 0xFF), ("PCMA", 0xD5)])
def test_no_sound_is_the_idle_code(law, silence):
    """ITU-T G.711 (11/1988): the positive code of least magnitude; A-law has no zero, but +8 and -8."""
    assert ENCODERS[law](np.zeros(1, np.int16))[0] == silence


@pytest.mark.parametrize("law", DECODERS)
def test_a_decoded_value_encodes_to_itself(law):
    codes = ENCODERS[law](DECODERS[law](EVERY_OCTET))
    same = codes == EVERY_OCTET
    if law == "PCMU":  # the negative zero comes back as the positive one
        assert EVERY_OCTET[~same].tolist() == [0x7F]
        assert codes[0x7F] == 0xFF
    else:
        assert same.all()


@pytest.mark.parametrize("law", DECODERS)
def test_a_louder_sample_never_decodes_softer(law):
    assert (np.diff(DECODERS[law](ENCODERS[law](EVERY_SAMPLE)).astype(int)) >= 0).all()


@pytest.mark.parametrize("law", DECODERS)
def test_the_encoder_agrees_with_libsndfile_within_one_step(law):
    file = BytesIO()
    soundfile.write(file, EVERY_SAMPLE, 8000, format="RAW", subtype=SNDFILE[law])
    theirs = DECODERS[law](np.frombuffer(file.getvalue(), np.uint8)).astype(int)
    ours = DECODERS[law](ENCODERS[law](EVERY_SAMPLE)).astype(int)
    levels = np.unique(np.concatenate([theirs, ours]))
    apart = np.abs(np.searchsorted(levels, theirs) - np.searchsorted(levels, ours))
    assert apart.max() <= 1
    assert (apart > 0).sum() <= 384  # decision values only: 127 of each law's 128 a sign, three in the lowest bits


@pytest.mark.parametrize("law", DECODERS)
def test_quantising_noise_is_level_over_30_db(law):
    """Sine of 1004 Hz by level, as tabled; common practice: 8 bits sound like 12, as both laws keep about 37 dB."""
    rows = [row for row in rows_of(LEVELS) if row["quantity"] == "SNR_dB_sine" and f"law={law};" in row["inputs"]]
    assert len(rows) == 5
    overload = {"PCMU": 8159 * 4, "PCMA": 4096 * 8}[law] / 10 ** ({"PCMU": 3.17, "PCMA": 3.14}[law] / 20)
    for row in rows:
        level_dbm0 = float(row["inputs"].split("level_dBm0=")[1].split(";")[0])
        tone = overload * 10 ** (level_dbm0 / 20) * np.sin(2 * np.pi * 1004 * np.arange(80_000) / 8000)
        noise = DECODERS[law](ENCODERS[law](np.round(tone).astype(np.int16))) - tone
        snr_db = 10 * np.log10((tone**2).mean() / (noise**2).mean())
        assert snr_db == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


@pytest.mark.parametrize("law", DECODERS)
def test_the_digital_milliwatt_decodes_as_printed(law):
    """ITU-T G.711 (11/1988), Tables 5 and 6: eight octets of 1 kHz at 0 dBm0."""
    printed = {row["id"]: row["expected"] for row in rows_of(LEVELS)}
    octets = np.array([int(code, 16) for code in printed[f"DMW-{law}-SEQ"].split()], np.uint8)
    np.testing.assert_array_equal(DECODERS[law](octets), [int(value) for value in printed[f"DMW-{law}-PCM"].split()])


@pytest.mark.parametrize("law", DECODERS)
def test_8000_samples_of_one_octet_make_64_kbit_s(law):
    """Common practice: the basic channel of digital telephony."""
    codec = CODECS[law]
    octets = np.zeros(8000, np.uint8)
    samples, offsets = decode(law, octets, np.array([0, 160, 8000]))
    assert len(samples) == codec.samples_in(8000) == codec.sampling_rate_hz == 8000
    assert offsets.tolist() == [0, 160, 8000]
    assert 8000 * 8 == 64_000


def test_encodings_are_found_in_any_letter_case():
    assert codec_of("pcmu") is CODECS["PCMU"]
    np.testing.assert_array_equal(sample_table("Pcma"), g711.PCMA_SAMPLES)


def test_an_unknown_encoding_is_answered_with_the_known_ones():
    with pytest.raises(MissingCodec, match=r"no decoder for SOUND; decoders exist for PCMU, PCMA"):
        decode("SOUND", np.zeros(1, np.uint8), np.array([0, 1]))
