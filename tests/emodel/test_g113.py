import pytest

from rtpaudit.emodel.g113 import NOT_CONCEALED, ROWS, impairment, reason_for_no_rating
from rtpaudit.planning import CodecValues
from tests.published import published_rows

# Our media subtype beside codec, bit rate and loss condition of the published row.
NAMES = {
    ("PCMU", None, 25.1): ("G.711", "64", "with PLC"),
    ("PCMA", None, 25.1): ("G.711", "64", "with PLC"),
    ("PCMU", None, 4.3): ("G.711", "64", "no PLC"),
    ("PCMA", None, 4.3): ("G.711", "64", "no PLC"),
    ("G729", None, 19.0): ("G.729A + VAD", "8", "20 ms"),
    ("G723", 6.3, 16.1): ("G.723.1 + VAD", "6.3", "30 ms"),
    ("G723", 5.3, None): ("G.723.1 ACELP", "5.3", "no loss"),
    ("GSM-EFR", None, 10.0): ("GSM-EFR", "12.2", "20 ms"),
    ("GSM", None, None): ("GSM-FR (06.10)", "13", "no loss"),
    ("GSM-HR-08", None, None): ("GSM-HR (06.20)", "5.6", "no loss"),
    ("G726-40", None, None): ("G.726/G.727", "40", "no loss"),
    ("G726-32", None, None): ("G.726/G.727", "32", "no loss"),
    ("G726-24", None, None): ("G.726/G.727", "24", "no loss"),
    ("G726-16", None, None): ("G.726/G.727", "16", "no loss"),
    ("G728", None, None): ("G.728", "16", "no loss"),
    ("EVRC", None, None): ("IS-127 RCELP", "8", "no loss"),
}
PUBLISHED = [row for row in published_rows("codec_impairments") if row["scale"] == "NB" and row["Ie"]]


@pytest.mark.parametrize("row", ROWS + NOT_CONCEALED, ids=lambda row: f"{row.encoding}-{row.kbit_s}-{row.Bpl}")
def test_each_row_is_a_published_one(row) -> None:
    codec, kbit_s, condition = NAMES[row.encoding, row.kbit_s, row.Bpl]
    (printed,) = [
        each
        for each in PUBLISHED
        if (each["codec"], each["kbit_s"]) == (codec, kbit_s) and condition in each["loss_condition"]
    ]
    assert row.Ie == float(printed["Ie"])
    assert row.Bpl == (float(printed["Bpl"]) if printed["Bpl"] else None)
    assert row.source == printed["source"]
    assert row.how_known.startswith("from memory") == printed["how_known"].startswith("from memory")


@pytest.mark.parametrize("encoding", ["PCMU", "pcmu", "PCMA"])
def test_a_receiver_that_does_not_conceal_g711_suffers_more(encoding) -> None:
    assert impairment(encoding).Bpl == 25.1
    assert impairment(encoding, conceals_loss=False).Bpl == 4.3


def test_other_codecs_conceal_by_themselves() -> None:
    assert impairment("G729", conceals_loss=False) == impairment("G729")


def test_the_bit_rate_chooses_the_row_where_there_are_several() -> None:
    assert impairment("G723").Ie == 15.0
    assert impairment("G723", kbit_s=6.3).Ie == 15.0
    assert impairment("G723", kbit_s=5.3).Ie == 19.0


def test_one_codec_in_two_packings_has_one_row() -> None:
    assert impairment("AAL2-G726-32") == impairment("G726-32") == impairment("G721")


@pytest.mark.parametrize("encoding", ["G722", "opus", "iLBC", "AMR", "AMR-WB", "speex", "L16", "unknown", ""])
def test_no_rating_is_made_up_where_g113_has_no_row(encoding) -> None:
    assert impairment(encoding) is None
    assert reason_for_no_rating(encoding)


def test_the_reason_names_what_is_missing() -> None:
    assert reason_for_no_rating("unknown") == "encoding not known, so no Ie and Bpl"
    assert "not narrowband" in reason_for_no_rating("G722")
    assert "not narrowband" in reason_for_no_rating("PCMU", 16000)
    assert reason_for_no_rating("opus") == "G.113 Appendix I has no values for opus"


def test_g711_sampled_at_16_khz_gets_no_narrowband_values() -> None:
    assert impairment("PCMU", sampling_rate_hz=16000) is None


def test_the_users_own_values_win() -> None:
    own = {"ilbc": CodecValues(Ie=11.0, Bpl=32.0), "PCMA": CodecValues(Ie=1.0)}
    assert (impairment("iLBC", own=own).Ie, impairment("iLBC", own=own).Bpl) == (11.0, 32.0)
    assert impairment("PCMA", own=own).Ie == 1.0
    assert impairment("PCMU", own=own).Bpl == 25.1


def test_a_row_without_robustness_says_what_stands_in() -> None:
    assert "no Bpl for GSM" in impairment("GSM").note
    assert impairment("PCMU").note == ""
