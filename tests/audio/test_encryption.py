import numpy as np
import pytest

from rtpaudit.audio.encryption import Cipher, cipher_of
from rtpaudit.codecs import g711
from tests.audio.sounds import noise, packets, reader, silence, sine, to_int16

ENCODE = {"PCMU": g711.encode_pcmu, "PCMA": g711.encode_pcma}


def cipher(octets, encoding, size=160):
    return cipher_of(*packets(octets, size)[:3], encoding)


def ciphertext(count, seed=1):
    return np.random.default_rng(seed).integers(0, 256, count).astype(np.uint8)


@pytest.mark.parametrize("encoding", ["PCMU", "PCMA", "G722", "L16"])
@pytest.mark.parametrize("seed", range(5))
def test_ciphertext_under_the_name_of_a_waveform_codec_is_encrypted(encoding, seed):
    verdict = cipher(ciphertext(170 * 60, seed), encoding, 170)
    assert verdict.cipher is Cipher.ENCRYPTED
    assert verdict.confidence_pct > 80
    assert verdict.entropy_bits > 7.95
    assert abs(verdict.deviation_sigma) < 4


LOUD = {
    "speech": reader().astype(float),
    "loud speech": 8.0 * reader(),
    "noise at full level": noise(6, -3),
    "loud noise": noise(6, -10),
    "clipped noise": noise(6, 6),
    "music": sum(sine(hz, 6, -18, phase=hz) for hz in (131, 165, 196, 262, 330, 392, 523, 1047)),
    "silence": silence(6),
}


@pytest.mark.parametrize("law", ENCODE)
@pytest.mark.parametrize("name", LOUD)
def test_sound_in_g711_is_plain_however_loud(law, name):
    verdict = cipher(ENCODE[law](to_int16(LOUD[name])), law)
    assert verdict.cipher is Cipher.PLAIN
    assert verdict.confidence_pct >= 90


@pytest.mark.parametrize("law", ENCODE)
def test_noise_whose_codes_are_as_even_as_may_be_is_plain(law):
    # Magnitudes spread evenly over the segments of the code: the flattest histogram that a sound can have.
    random = np.random.default_rng(3)
    sound = np.exp(random.uniform(np.log(60), np.log(32000), 48000)) * random.choice([-1, 1], 48000)
    assert cipher(ENCODE[law](to_int16(sound)), law).cipher is Cipher.PLAIN


def test_too_few_octets_are_undecided():
    assert cipher(ciphertext(160 * 20), "PCMU").cipher is Cipher.UNDECIDED
    assert cipher(np.empty(0, np.uint8), "PCMU").cipher is Cipher.UNDECIDED


@pytest.mark.parametrize("encoding", ["G729", "AMR", "unknown", ""])
def test_entropy_cannot_tell_a_codec_that_compresses_from_ciphertext(encoding):
    assert cipher(ciphertext(20 * 500), encoding, 20).cipher is Cipher.UNDECIDED


def test_a_bit_that_keeps_to_its_value_proves_plain():
    octets = ciphertext(20 * 500)
    octets[7::20] |= 0x10
    assert cipher(octets, "G729", 20).cipher is Cipher.PLAIN


def test_the_first_octet_of_opus_tells():
    octets = ciphertext(80 * 300)
    assert cipher(octets, "opus", 80).cipher is Cipher.ENCRYPTED
    plain = octets.copy()
    plain[::80] = 0x78
    assert cipher(plain, "opus", 80).cipher is Cipher.PLAIN
    short = np.random.default_rng(2).choice([0x08, 0x0B, 0x48, 0x78], 300).astype(np.uint8)
    plain[::80] = short
    assert cipher(plain, "opus", 80).cipher is Cipher.PLAIN


def test_payloads_outside_the_buffer_do_no_harm():
    octets, start, length, _ = packets(ciphertext(16000))
    start[3], start[4], length[5] = -500, 10**9, 10**6
    assert cipher_of(octets, start, length, "PCMU").octets > 0
