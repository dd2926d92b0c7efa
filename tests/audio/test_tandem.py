"""A second coding by the other law, on speech that is converted in the test."""

import numpy as np
import pytest
import soundfile

from rtpaudit.audio.tandem import tandem_of
from rtpaudit.codecs.g711 import PCMA_SAMPLES, PCMU_SAMPLES, encode_pcma, encode_pcmu
from tests.sources import ROOT

LAWS = {"PCMU": (encode_pcmu, PCMU_SAMPLES), "PCMA": (encode_pcma, PCMA_SAMPLES)}
OTHER = {"PCMU": "PCMA", "PCMA": "PCMU"}


@pytest.fixture(scope="module", params=["reader", "desk", "guest"])
def speech(request) -> np.ndarray:
    return soundfile.read(ROOT / "fixtures" / "audio" / f"{request.param}.wav", dtype="int16")[0]


def coded(samples: np.ndarray, law: str) -> np.ndarray:
    encode, table = LAWS[law]
    return table[encode(samples)]


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("level", [0.25, 0.5, 1.0])
def test_speech_that_was_coded_once_has_no_sign_of_the_other_law(speech, law, level) -> None:
    assert tandem_of(coded((speech * level).astype(np.int16), law), law) is None


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
def test_speech_that_was_coded_by_the_other_law_before_is_told(speech, law) -> None:
    found = tandem_of(coded(coded(speech, OTHER[law]), law), law)
    assert found is not None
    assert found.law == OTHER[law]
    assert found.seen < 0.01 * found.expected


def test_an_encoder_that_cuts_instead_of_rounding_leaves_the_same_holes(speech) -> None:
    """Samples a little below, as truncation leaves them."""
    assert tandem_of(coded(coded(speech, "PCMA") - 1, "PCMU"), "PCMU") is not None


@pytest.mark.parametrize("samples", [np.zeros(80_000, np.int16), np.zeros(0, np.int16), np.full(80_000, 8, np.int16)])
def test_silence_tells_nothing(samples) -> None:
    assert tandem_of(samples, "PCMU") is None


def test_a_tone_of_few_values_tells_nothing() -> None:
    tone = (8000 * np.sin(2 * np.pi * 1000 / 8000 * np.arange(80_000))).astype(np.int16)
    assert tandem_of(coded(tone, "PCMU"), "PCMU") is None


def test_other_encodings_are_left_alone(speech) -> None:
    assert tandem_of(speech, "L16") is None
