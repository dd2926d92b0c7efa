"""Encryption told from the payload alone: ciphertext has no structure, coded sound always has some."""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from rtpaudit.audio.coding import LAWS, Octets
from rtpaudit.audio.sampling import Lengths, Positions, payload_groups

WAVEFORM = (*LAWS, "G722", "L16", "L8", "G726-32", "G726-40", "G726-24", "G726-16", "DVI4")
"""codecs that follow the waveform: octets of sound are never all equally frequent"""
LEAST_OCTETS = 4000
"""fewer cannot tell loud noise in G.711 from ciphertext"""
LEAST_PACKETS = 64
GROUP, GROUPS = 50, 60
UNIFORM_SIGMA = 6.0
"""chi-square beyond it is structure; chance does not reach it"""
BIASED_SIGMA = 7.0
"""of one bit out of some hundred that are looked at"""
BITS_OCTETS = 24
FIRST_OCTETS = 12
"""different first octets of a hundred Opus packets, at most; random ones show 83"""


class Cipher(StrEnum):
    """What the payload says about its encryption."""

    PLAIN = "plain"
    ENCRYPTED = "encrypted"
    UNDECIDED = "undecided"


@dataclass(frozen=True, slots=True)
class CipherVerdict:
    """Whether a payload looks encrypted."""

    cipher: Cipher
    octets: int
    entropy_bits: float
    """of one octet; 8 where all are equally frequent, NaN without octets"""
    deviation_sigma: float
    """of the octets' counts from equal ones, in standard deviations of chi-square"""
    confidence_pct: float


def cipher_of(octets: Octets, start: Positions, length: Lengths, encoding: str) -> CipherVerdict:
    """Whether payloads look encrypted.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
    start : int64 array, shape (n,)
    length : int32 array, shape (n,)
        Payload ``i`` is ``octets[start[i]:start[i] + length[i]]``.
    encoding : str
        IANA media subtype that signalling or payload type named.

    Returns
    -------
    CipherVerdict

    Notes
    -----
    Common practice: a chi-square test of the octets against equal frequency. For codecs that compress, octets may be
    nearly as even; then a bit that keeps to one value at its place in the payload proves plain, and nothing but the
    first octet of Opus, which names mode and bandwidth and hardly changes, can prove encrypted.

    References
    ----------
    RFC 3711 (SRTP leaves the header, encrypts the payload); RFC 6716, 3.1, from memory (first octet of Opus).
    """
    payloads = [one for _, group in payload_groups(octets, start, length, GROUP, GROUPS) for one in group]
    gathered = np.concatenate(payloads) if payloads else np.empty(0, np.uint8)
    counts = np.bincount(gathered, minlength=256)
    total = len(gathered)
    if total == 0:
        return CipherVerdict(Cipher.UNDECIDED, 0, float("nan"), float("nan"), 0.0)
    share = counts[counts > 0] / total
    entropy = float(-np.sum(share * np.log2(share)))
    chi_square = float(np.sum((counts - total / 256.0) ** 2) / (total / 256.0))
    deviation = (chi_square - 255.0) / np.sqrt(2.0 * 255.0)
    cipher, confidence = _decide(payloads, total, deviation, encoding)
    return CipherVerdict(cipher, total, entropy, deviation, confidence)


def _decide(payloads: list[Octets], total: int, deviation: float, encoding: str) -> tuple[Cipher, float]:
    """The verdict and the confidence in it [%]."""
    if deviation > UNIFORM_SIGMA and total >= 256:
        return Cipher.PLAIN, 99.0 if deviation > 5 * UNIFORM_SIGMA else 90.0
    if _strongest_bias(payloads) > BIASED_SIGMA:
        return Cipher.PLAIN, 95.0
    if encoding in WAVEFORM or encoding.upper() in WAVEFORM:
        if total < LEAST_OCTETS:
            return Cipher.UNDECIDED, 0.0
        return Cipher.ENCRYPTED, min(99.0, 80.0 + total / 2000.0)
    if encoding.lower() == "opus" and len(payloads) >= LEAST_PACKETS:
        hundred = np.array([one[0] for one in payloads if len(one)][:100])
        if len(np.unique(hundred)) > 2 * FIRST_OCTETS:
            return Cipher.ENCRYPTED, 95.0
    return Cipher.UNDECIDED, 0.0


def _strongest_bias(payloads: list[Octets]) -> float:
    """By how many standard deviations the most biased bit at a place of the payload leaves one half."""
    long = [one[:BITS_OCTETS] for one in payloads if len(one) >= BITS_OCTETS]
    width = BITS_OCTETS
    if len(long) < LEAST_PACKETS:
        width = min((len(one) for one in payloads), default=0)
        long = [one[:width] for one in payloads]
    if len(long) < LEAST_PACKETS or width == 0:
        return 0.0
    bits = np.unpackbits(np.stack(long), axis=1).mean(axis=0)
    return float(np.max(np.abs(bits - 0.5)) * 2.0 * np.sqrt(len(long)))
