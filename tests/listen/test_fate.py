import math

import pytest

import rtpaudit
from rtpaudit.assess.laying import lay_out
from rtpaudit.assess.results import AssessedStream
from rtpaudit.emodel.g107 import effective_equipment_impairment
from rtpaudit.listen.fate import Fate, fate_of, predict
from rtpaudit.profile import CodecValues, Network, PlanningValues, Profile
from tests.listen.captures import capture, voice


@pytest.fixture(scope="module")
def caller(tmp_path_factory: pytest.TempPathFactory) -> AssessedStream:
    """Lost are the packets of 5.0 to 5.2 s and of 8.0 to 8.02 s, late those of 6.0 to 6.1 s."""
    path = tmp_path_factory.mktemp("fate") / "call.pcap"
    path.write_bytes(capture(voice(12.0), voice(12.0, "guest"), [(5.0, 5.2), (8.0, 8.02)], [(6.0, 6.1)]))
    return next(one for one in rtpaudit.audit(path).assessment.streams if one.stream.ssrc == 1)


def fate(one: AssessedStream, begin_s: float, end_s: float) -> Fate:
    return fate_of(one.stream, lay_out(one.stream), one.playback, round(begin_s * 8000), round(end_s * 8000))


def test_packets_of_a_clip_are_counted(caller: AssessedStream) -> None:
    whole = fate(caller, 4.0, 10.0)
    assert (whole.packets_expected, whole.packets_lost, whole.packets_discarded) == (300, 11, 5)
    assert whole.missing_pct == pytest.approx(16 / 3)
    # Three runs of 10, 1 and 5 packets; by chance they would have a mean of 1 / (1 - 16/300).
    assert whole.burst_ratio == pytest.approx(16 / 3 * (1 - 16 / 300))


def test_what_lies_beside_the_clip_does_not_count(caller: AssessedStream) -> None:
    clean = fate(caller, 8.5, 11.0)
    assert (clean.packets_expected, clean.packets_lost, clean.packets_discarded) == (125, 0, 0)
    assert math.isnan(clean.burst_ratio)


def test_the_whole_stream_has_the_figures_of_the_stream(caller: AssessedStream) -> None:
    whole = fate(caller, 0.0, 20.0)
    figures = caller.figures
    assert (whole.packets_expected, whole.packets_lost) == (figures.packets_expected, figures.packets_lost)
    assert whole.packets_discarded == figures.packets_discarded
    assert whole.burst_ratio == pytest.approx(figures.burst_ratio)


def test_a_stretch_without_packets_has_no_figures(caller: AssessedStream) -> None:
    nothing = fate(caller, 30.0, 40.0)
    assert nothing.packets_expected == 0
    assert math.isnan(predict(caller.stream, nothing, Profile()).mos)


def test_the_prediction_leaves_out_all_delay(caller: AssessedStream) -> None:
    clean = fate(caller, 8.5, 11.0)
    for profile in (Profile(), Profile(network=Network(delay_ms=400.0)), Profile(planning=PlanningValues(Ta=300.0))):
        assert predict(caller.stream, clean, profile).r_factor == pytest.approx(93.2, abs=0.05)


def test_the_prediction_follows_the_packets_of_the_clip(caller: AssessedStream) -> None:
    lossy, clean = fate(caller, 4.0, 10.0), fate(caller, 8.5, 11.0)
    difference = predict(caller.stream, clean, Profile()).r_factor - predict(caller.stream, lossy, Profile()).r_factor
    assert difference == pytest.approx(
        float(effective_equipment_impairment(0.0, 25.1, lossy.missing_pct, lossy.burst_ratio)), abs=1e-6
    )


def test_an_encoding_without_values_has_no_prediction(caller: AssessedStream) -> None:
    from dataclasses import replace

    other = replace(caller.stream, encoding="opus")
    assert math.isnan(predict(other, fate(caller, 4.0, 10.0), Profile()).mos)
    own = Profile(encodings={"opus": CodecValues(Ie=10.0, Bpl=20.0)})
    assert predict(other, fate(caller, 8.5, 11.0), own).r_factor == pytest.approx(83.2, abs=0.05)
