import numpy as np
import pytest

from rtpaudit.emodel.g109 import BANDS, EDGES, quality_band
from tests.published import published_rows

WORDS = [row for row in published_rows("emodel_checkpoints") if row["quantity"] == "G109_category"]
LIMITS = {
    row["inputs"]: float(row["expected"])
    for row in published_rows("planning_limits")
    if row["source"].startswith("ITU-T G.109 Table 1")
}


@pytest.mark.parametrize("row", [pytest.param(row, id=row["id"]) for row in WORDS])
def test_each_published_rating_has_its_word(row) -> None:
    assert quality_band(float(row["inputs"].removeprefix("R="))) == row["expected"]


def test_each_band_begins_where_the_table_says() -> None:
    assert dict(zip(BANDS[1:], EDGES, strict=True)) == LIMITS


def test_a_rating_just_under_an_edge_has_the_lower_word() -> None:
    assert quality_band(89.999999) == "high"
    assert quality_band(-20.0) == "not recommended"
    assert quality_band(104.0) == "best"


def test_no_rating_has_no_word() -> None:
    assert quality_band(float("nan")) == ""


def test_arrays_keep_their_shape() -> None:
    words = quality_band(np.array([[93.2, np.nan], [49.0, 70.0]]))
    assert words.tolist() == [["best", ""], ["not recommended", "medium"]]
