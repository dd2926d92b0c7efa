"""Explain: the same words as in the report, and help where the name is wrong."""

from pathlib import Path

import pytest

from rtpaudit.cli import main
from rtpaudit.columns import TABLES
from rtpaudit.findings import CATALOGUE
from tests.cli.conftest import Run


def test_without_a_name_every_finding_is_listed(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["explain"]) == 0
    text = capsys.readouterr().out
    assert CATALOGUE
    for name in CATALOGUE:
        assert f"  {name} " in text
    assert max(map(len, text.splitlines())) <= 120


def test_a_finding_has_its_page(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["explain", "loss-burst"]) == 0
    text = " ".join(capsys.readouterr().out.split())
    rule = CATALOGUE["loss-burst"]
    for part in (rule.means, rule.measured_as, rule.basis, rule.check_next):
        assert " ".join(part.split()) in text


def test_every_column_of_every_table_can_be_listed(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["explain", "columns"]) == 0
    text = capsys.readouterr().out
    for table, columns in TABLES.items():
        assert f"{table}.csv" in text
        for column in columns:
            assert f"  {column.name}  " in text


def test_a_column_is_explained_with_unit_and_source_in_each_table_that_has_it(
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert main(["explain", "jitter_ms"]) == 0
    text = capsys.readouterr().out
    for table in ("calls", "streams", "windows", "reports"):
        assert f"jitter_ms  in {table}: number [ms]" in text
    assert "Source: RFC 3550, 6.4.1 and A.8" in text


def test_a_table_is_explained_by_its_columns(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["explain", "gaps"]) == 0
    text = capsys.readouterr().out
    assert "first_missing" in text
    assert "jitter_ms" not in text


def test_a_name_that_is_nearly_right_is_met_with_the_right_one(run: Run, tmp_path: Path) -> None:
    result = run("explain", "jiter_ms")
    assert result.status == 2
    assert "did you mean jitter_ms" in result.err
