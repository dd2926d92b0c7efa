import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.audio.scan import EXTREMES, scan
from rtpaudit.codecs import g711
from tests.naive import audio as naive


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32), st.integers(0, 900), st.sampled_from([8000, 11025, 48000]))
def test_blocks_hold_the_sums_of_their_samples(seed, count, rate):
    random = np.random.default_rng(seed)
    samples = random.integers(-32768, 32768, count).astype(np.int16)
    received = random.random(count) > 0.2
    scanned = scan(samples, rate, received)
    block = rate // 100
    blocks = [slice(first, first + block) for first in range(0, count, block)]
    known = [samples[one][received[one]].astype(np.int64) for one in blocks]
    assert scanned.block_samples == block
    assert scanned.received.tolist() == [len(one) for one in known]
    assert scanned.total.tolist() == [one.sum() for one in known]
    assert scanned.energy.tolist() == [(one**2).sum() for one in known]
    assert scanned.peak.tolist() == [np.abs(one).max(initial=0) for one in known]


@settings(max_examples=60, deadline=None)
@given(st.lists(st.sampled_from([-32124, 32124, 0, 32000]), max_size=400))
def test_clipped_runs_agree_with_counting(values):
    scanned = scan(np.array(values, np.int16), 8000, encoding="PCMU")
    ours = (int(scanned.clipped.sum()), scanned.clipped_runs, scanned.longest_clipped_run)
    assert ours == naive.clipped(values, -32124, 32124)


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
def test_the_extremes_are_those_of_the_decoding_tables(law):
    table = {"PCMU": g711.PCMU_SAMPLES, "PCMA": g711.PCMA_SAMPLES}[law]
    assert EXTREMES[law] == (table.min(), table.max())


def test_what_was_not_received_is_no_sum():
    samples = np.full(160, 1000, np.int16)
    scanned = scan(samples, 8000, np.arange(160) < 80)
    assert scanned.received.tolist() == [80, 0]
    assert np.isnan(scanned.power()[1])
    assert scanned.dc_offset == 1000


def test_a_mask_of_another_length_and_a_rate_in_khz_are_refused():
    with pytest.raises(ValueError, match="mask has shape"):
        scan(np.zeros(10, np.int16), 8000, np.ones(9, np.bool_))
    with pytest.raises(ValueError, match="kHz"):
        scan(np.zeros(10, np.int16), 8)
