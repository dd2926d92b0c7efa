import pytest

from rtpaudit.emodel.g113 import impairment
from rtpaudit.emodel.notes import rating_note


@pytest.mark.parametrize(("symbol", "edge"), [("Ppl", 20.0), ("Ta", 500.0), ("BurstR", 8.0)])
def test_a_note_begins_just_over_what_g107_covers(symbol, edge) -> None:
    assert rating_note(**{symbol: edge}) == ""
    assert symbol in rating_note(**{symbol: edge * 1.01})


def test_a_note_names_the_figure_and_the_limit() -> None:
    said = rating_note(Ppl=23.456)
    assert said == "loss and discards (Ppl) of 23.46 % is over the 20 % that G.107 covers"


def test_several_limits_are_told_together_and_the_codec_last() -> None:
    said = rating_note(Ta=620.0, Ppl=30.0, BurstR=1.2, further=impairment("GSM").note)
    first, second, third = said.split("; ")
    assert "Ppl" in first
    assert "Ta" in second
    assert "GSM" in third


@pytest.mark.parametrize("BurstR", [float("nan"), 0.4, 1.0])
def test_a_burst_ratio_that_counts_as_one_is_no_limit(BurstR) -> None:
    assert rating_note(BurstR=BurstR, Ppl=0.0, Ta=55.0) == ""


def test_an_echo_louder_than_the_model_knows_is_told() -> None:
    assert "TELR" in rating_note(TELR=2.0)


def test_a_name_without_a_range_is_refused() -> None:
    with pytest.raises(ValueError, match="known are"):
        rating_note(loss=3.0)
