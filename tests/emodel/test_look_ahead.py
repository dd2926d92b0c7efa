import pytest

from rtpaudit.emodel.look_ahead import ROWS, look_ahead_ms


@pytest.mark.parametrize(("encoding", "milliseconds"), [("PCMU", 0.0), ("pcma", 0.0), ("G723", 7.5), ("g729", 5.0)])
def test_the_look_ahead_of_common_codecs(encoding, milliseconds) -> None:
    """G723: RFC 3551, 4.5.3. G729: ITU-T G.729, from memory."""
    assert look_ahead_ms(encoding) == milliseconds


def test_an_unknown_encoding_adds_nothing() -> None:
    assert look_ahead_ms("unknown") == 0.0


def test_each_row_names_its_source() -> None:
    for row in ROWS:
        assert row.source
        assert 0.0 <= row.milliseconds <= 20.0
