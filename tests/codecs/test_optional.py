from fractions import Fraction

import numpy as np
import pytest

import rtpaudit.codecs
from rtpaudit.codecs import CODECS, codec_of, decode
from rtpaudit.errors import MissingCodec

OPTIONAL = [name for name, codec in CODECS.items() if codec.extra]
FRAMES = {"G729": (10, 80), "GSM": (33, 160), "G726-32": (80, 160), "G726-24": (60, 160), "AAL2-G726-16": (40, 160)}


def tone(hz, rate_hz, seconds=1.0):
    return np.round(8000 * np.sin(2 * np.pi * hz * np.arange(int(rate_hz * seconds)) / rate_hz)).astype(np.int16)


def encoded(samples, coder, rate_hz, frame, bit_rate, layout="mono", **options):
    """Payloads of 20 or 30 ms by the encoders that come with PyAV."""
    av = pytest.importorskip("av")
    context = av.CodecContext.create(coder, "w")
    context.sample_rate, context.layout, context.format, context.bit_rate = rate_hz, layout, "s16", bit_rate
    context.time_base, context.options = Fraction(1, rate_hz), options
    payloads = []
    for begin in range(0, len(samples) - frame + 1, frame):
        piece = samples[begin : begin + frame].reshape(1, -1)
        if layout == "stereo":
            piece = np.repeat(piece, 2, axis=1).reshape(1, -1)
        part = av.AudioFrame.from_ndarray(np.ascontiguousarray(piece), format="s16", layout=layout)
        part.sample_rate, part.pts = rate_hz, begin
        payloads += [bytes(packet) for packet in context.encode(part)]
    return payloads + [bytes(packet) for packet in context.encode(None)]


def joined(payloads):
    offsets = np.cumsum([0, *(len(one) for one in payloads)]).astype(np.int64)
    return np.frombuffer(b"".join(payloads), np.uint8), offsets


@pytest.mark.parametrize(("encoding", "coder", "bit_rate"), [
    ("AAL2-G726-32", "g726", 32_000), ("G726-32", "g726le", 32_000), ("G726-16", "g726le", 16_000),
    ("G726-24", "g726le", 24_000), ("G726-40", "g726le", 40_000), ("AAL2-G726-40", "g726", 40_000),
])  # fmt: skip
def test_a_tone_survives_g726(encoding, coder, bit_rate):
    sent = tone(400, 8000)
    octets = b"".join(encoded(sent, coder, 8000, 160, bit_rate))[: bit_rate // 8]
    packet = bit_rate // 8 // 50
    heard, _ = decode(encoding, *joined([octets[at : at + packet] for at in range(0, len(octets), packet)]))
    assert len(heard) == codec_of(encoding).samples_in(bit_rate // 8) == 8000
    error = heard[400:].astype(float) - sent[400:]
    assert (error**2).mean() < 0.05 * (sent.astype(float) ** 2).mean()


def strongest_hz(samples, rate_hz):
    spectrum = np.abs(np.fft.rfft(samples * np.hanning(len(samples))))
    return np.argmax(spectrum) * rate_hz / len(samples)


def test_a_tone_survives_opus_and_its_clock():
    """RFC 7587, 4.1: 20 ms are 960 ticks."""
    heard, offsets = decode("opus", *joined(encoded(tone(400, 48_000), "libopus", 48_000, 960, 64_000, "stereo")))
    assert set(np.diff(offsets)) == {960}
    assert strongest_hz(heard, 48_000) == pytest.approx(400, abs=2)
    assert 20 * np.log10(heard[4800:43_200].std() / (8000 / 2**0.5)) == pytest.approx(0, abs=1)


def test_a_tone_survives_g723():
    heard, offsets = decode("G723", *joined(encoded(tone(400, 8000), "g723_1", 8000, 240, 6300)))
    assert set(np.diff(offsets)) == {240}
    assert strongest_hz(heard, 8000) == pytest.approx(400, abs=2)
    assert 20 * np.log10(heard[800:7200].std() / (8000 / 2**0.5)) == pytest.approx(0, abs=2)


@pytest.mark.parametrize("encoding", FRAMES)
def test_frames_have_their_length(encoding):
    pytest.importorskip("av")
    octets, samples = FRAMES[encoding]
    payload = bytes([0xD0]) + bytes(octets - 1)
    _, offsets = decode(encoding, *joined([payload, payload * 2, payload]))
    assert offsets.tolist() == [0, samples, 3 * samples, 4 * samples]
    assert codec_of(encoding).samples_in(2 * octets) == 2 * samples


@pytest.mark.parametrize(("octets", "samples"), [(38, 160), (50, 240)])
def test_ilbc_has_two_frame_lengths(octets, samples):
    """RFC 3951: 304 bits every 20 ms, 400 bits every 30 ms."""
    pytest.importorskip("av")
    _, offsets = decode("iLBC", *joined([bytes(octets)] * 3))
    assert offsets.tolist() == [0, samples, 2 * samples, 3 * samples]


def test_a_silence_descriptor_of_g729_gives_no_samples():
    """RFC 3551, 4.5.6: two octets, alone or after whole frames."""
    pytest.importorskip("av")
    _, offsets = decode("G729", *joined([bytes(20), bytes(12), bytes(2), bytes(10)]))
    assert offsets.tolist() == [0, 160, 240, 240, 320]


@pytest.mark.parametrize("encoding", OPTIONAL)
def test_noise_and_cut_packets_do_no_harm(encoding):
    pytest.importorskip("av")
    rng = np.random.default_rng(3)
    payloads = [rng.bytes(int(size)) for size in rng.integers(0, 120, 60)]
    samples, offsets = decode(encoding, *joined(payloads))
    assert len(offsets) == 61
    assert offsets[-1] == len(samples)
    assert (np.diff(offsets) >= 0).all()
    assert np.diff(offsets).max() <= codec_of(encoding).sampling_rate_hz / 2
    empty, none = decode(encoding, np.empty(0, np.uint8), np.zeros(1, np.int64))
    assert len(empty) == 0
    assert none.tolist() == [0]


@pytest.mark.parametrize("encoding", OPTIONAL)
def test_a_missing_extra_is_named(encoding, monkeypatch):
    monkeypatch.setattr(rtpaudit.codecs, "_is_installed", lambda module: False)
    with pytest.raises(
        MissingCodec, match=rf"decoder for {encoding} is not installed; pip install 'rtpaudit\[codecs\]'"
    ):
        decode(encoding, np.zeros(20, np.uint8), np.array([0, 20]))
