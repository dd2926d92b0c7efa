"""A quick part of the fault bench in the default tests; the whole is run by ``python -m tests.faultbench``."""

import re

import pytest

from rtpaudit.findings import CATALOGUE
from tests.faultbench.bench import CONTROLS, KINDS, bench, control, make
from tests.sources import ROOT

TABLE = ROOT / "docs" / "faultbench.md"
# Those that the bench itself shows to be hard to hear are not asked to be right each time.
UNSURE = {"clock-slips"}
QUICK_CONTROLS = [k for k, row in enumerate(CONTROLS) if row[0] in ("PCMU", "PCMA", "L16")][::9]


def test_there_are_kinds_enough_and_each_is_named_after_its_finding() -> None:
    assert len(KINDS) >= 30
    assert {one for kind in KINDS.values() for one in kind.accepts} <= set(CATALOGUE)


def test_every_promised_finding_has_a_kind_on_the_bench() -> None:
    assert {name.split("/")[0] for name in KINDS} == set(CATALOGUE)


@pytest.mark.parametrize("name", [name for name in KINDS if name not in UNSURE and "/" not in name])
def test_a_fault_is_named_rightly(name) -> None:
    verdict = bench(name, 1)
    assert verdict.right, f"{verdict.top or 'nothing'}: {[(one.finding, one.says) for one in verdict.findings]}"


@pytest.mark.parametrize("number", QUICK_CONTROLS, ids=lambda number: ", ".join(map(str, CONTROLS[number])))
def test_a_clean_control_has_no_headline(number) -> None:
    verdict = control(number, 1)
    assert not verdict.others
    assert [one.says for one in verdict.findings if one.severity != "remark"] == []


def test_a_seed_makes_the_same_capture_again() -> None:
    kind = KINDS["loss-burst"]
    assert make(kind, 4).octets == make(kind, 4).octets
    assert make(kind, 4).octets != make(kind, 5).octets


def test_the_table_in_the_documents_is_of_these_kinds_and_reaches_the_target() -> None:
    text = TABLE.read_text("utf-8")
    rows = re.findall(r"(?m)^\| ([a-z/-]+) \| (\d+) \| (\d+) \|", text)
    assert {name for name, _, _ in rows} == set(KINDS), "run: python -m tests.faultbench"
    assert all(int(captures) >= 10 for _, captures, _ in rows)
    right, captures = (sum(int(row[place]) for row in rows) for place in (2, 1))
    assert right >= 0.95 * captures
