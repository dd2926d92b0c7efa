"""The VoIP metrics block in units, and what it leaves unsaid."""

import math
import struct

import pytest

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.rtcp_voip import OCTETS, VoipMetrics
from rtpaudit.signalling.rtcp_xr import PARSERS
from tests.published import published_rows

PUBLISHED = {row["id"]: row["expected"] for row in published_rows("rtcp")}


def block(**fields: int) -> VoipMetrics:
    """Unknown throughout, but for the fields named."""
    values = {
        "loss": 0, "discard": 0, "burst": 0, "gap": 0, "burst_ms": 0, "gap_ms": 0, "round_trip": 0, "end_system": 0,
        "signal": 127, "noise": 127, "echo": 127, "gmin": 16, "r": 127, "external": 127, "lq": 127, "cq": 127,
        "configuration": 0, "nominal": 0, "maximum": 0, "most": 0,
    }  # fmt: skip
    return VoipMetrics.parse(0, struct.pack("!I4B4H2b7BxHHH", 2, *(values | fields).values()))


def test_the_block_has_its_printed_number_and_length() -> None:
    """RFC 3611 section 4.7. The text says seven words once; the drawing and the constant have eight."""
    assert PARSERS[int(PUBLISHED["XR-block_type"])][0] == "VoIP metrics"
    assert int(PUBLISHED["XR-block_length"]) * 4 == OCTETS


def test_the_rfc_s_example() -> None:
    """RFC 3611 section 4.7.2: 12 of 256 correspond to 5 %, 84 to 33 %, 10 to 4 %."""
    found = block(loss=12, discard=12, burst=84, gap=10, burst_ms=120, gap_ms=520)
    rates = (found.loss_pct, found.discard_pct, found.burst_density_pct, found.gap_density_pct)
    assert [round(rate) for rate in rates] == [5, 5, 33, 4]
    assert (found.burst_duration_ms, found.gap_duration_ms) == (120, 520)


def test_what_is_unavailable_is_missing() -> None:
    found = block()
    for value in (
        found.signal_level_dbm0, found.noise_level_dbm0, found.echo_return_loss_db, found.r_factor,
        found.external_r_factor, found.mos_lq, found.mos_cq, found.round_trip_ms, found.end_system_delay_ms,
    ):  # fmt: skip
        assert math.isnan(value)


def test_levels_are_signed() -> None:
    found = block(signal=-17, noise=-70, echo=45)
    assert (found.signal_level_dbm0, found.noise_level_dbm0, found.echo_return_loss_db) == (-17.0, -70.0, 45.0)


@pytest.mark.parametrize(("value", "r"), [(0, 0.0), (94, 94.0), (100, 100.0), (101, None), (127, None), (255, None)])
def test_ratings_outside_their_range_are_ignored(value: int, r: float | None) -> None:
    assert PUBLISHED["XR-R_range"] == "0..100"
    for found in (block(r=value).r_factor, block(external=value).external_r_factor):
        assert math.isnan(found) if r is None else found == r


@pytest.mark.parametrize(("value", "mos"), [(9, None), (10, 1.0), (35, 3.5), (50, 5.0), (51, None), (127, None)])
def test_scores_come_in_tenths(value: int, mos: float | None) -> None:
    """RFC 3611 section 4.7.5: 35 corresponds to 3.5."""
    for found in (block(lq=value).mos_lq, block(cq=value).mos_cq):
        assert math.isnan(found) if mos is None else found == mos


def test_the_receiver_s_configuration_is_told_in_words() -> None:
    for text, shift, read in (
        (PUBLISHED["XR-RX-PLC"], 6, lambda found: found.concealment),
        (PUBLISHED["XR-RX-JBA"], 4, lambda found: found.playout),
    ):
        for part in text.split(", "):
            bits, word = part.split(" ", 1)
            said = read(block(configuration=int(bits, 2) << shift))
            # The two words that people use and that mean the same.
            assert said == {"disabled (silence)": "silence", "non-adaptive": "fixed"}.get(word, word)
    assert block(configuration=0x3C).playout_rate == 12


def test_delays_are_in_milliseconds() -> None:
    found = block(round_trip=49, end_system=65, nominal=60, maximum=40, most=65_535)
    assert (found.round_trip_ms, found.end_system_delay_ms) == (49.0, 65.0)
    assert (found.playout_nominal_ms, found.playout_maximum_ms, found.playout_most_ms) == (60, 40, 65_535)


def test_every_cut_is_refused_by_name() -> None:
    for cut in range(OCTETS):
        with pytest.raises(MalformedPacket, match=f"RTCP XR VoIP metrics block has {cut} octets, needs 32"):
            VoipMetrics.parse(0, bytes(cut))
