"""Documents that follow the code: made ones are up to date, commands are those checked, links lead somewhere."""

import re
import runpy
import tomllib

import pytest

from tests.sources import ROOT
from tests.test_rooms import DRAWN

DOCUMENTS = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted((ROOT / "docs").glob("*.md"))]
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]


def test_the_table_of_measures_is_that_of_the_code() -> None:
    made = runpy.run_path(str(ROOT / "docs" / "make_measures.py"))["document"]()
    assert (ROOT / "docs" / "measures.md").read_text("utf-8") == made, "run: python docs/make_measures.py"


def test_the_pages_of_findings_are_those_of_the_catalogue() -> None:
    made = runpy.run_path(str(ROOT / "docs" / "make_findings.py"))["document"]()
    assert (ROOT / "docs" / "findings.md").read_text("utf-8") == made, "run: python docs/make_findings.py"


def test_both_commands_of_the_readme_are_those_that_are_checked() -> None:
    commands = re.findall(r"(?m)^```\n(python3 -m venv .*)\n```$", (ROOT / "README.md").read_text("utf-8"))
    assert len(commands) == 2
    assert commands[0].endswith("rtpaudit demo")
    assert commands[1].endswith("pytest")
    checks = (ROOT / ".ci" / "run").read_text("utf-8").splitlines()
    for command in commands:
        assert command in checks


def test_the_import_order_is_told_as_it_is_held() -> None:
    assert DRAWN in (ROOT / "DEVELOPERS.md").read_text("utf-8")


def requirements() -> list[str]:
    extras = [each for extra in PROJECT.get("optional-dependencies", {}).values() for each in extra]
    names = [re.split(r"[\s<>=!~\[;]", each, maxsplit=1)[0] for each in PROJECT["dependencies"] + extras]
    return sorted({name for name in names if name != PROJECT["name"]})


@pytest.mark.parametrize("package", requirements())
def test_each_dependency_stands_with_its_licence_and_its_use(package) -> None:
    rows = re.findall(
        rf"(?mi)^\| {re.escape(package)} \| (.+) \| (.+) \|$", (ROOT / "DEVELOPERS.md").read_text("utf-8")
    )
    assert len(rows) == 1, f"DEVELOPERS.md, Dependencies: one row for {package}, with its licence and what it is for"


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_links_between_documents_lead_somewhere(document) -> None:
    for target in re.findall(r"\]\(([^)#:]+)(?:#[^)]*)?\)", document.read_text("utf-8")):
        assert (document.parent / target).exists(), target
