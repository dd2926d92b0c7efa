"""What a finding or a column means, how it is known and from where: the same words as in the report."""

from collections.abc import Iterator
from textwrap import fill
from typing import TYPE_CHECKING, Annotated

import typer

from rtpaudit.cli.terminal import bold, say, visible, width
from rtpaudit.columns import TABLES, Column
from rtpaudit.errors import UnusableArguments

KINDS = {"text": "text", "count": "whole number", "number": "number", "time": "time", "yes_no": "yes or no"}

if TYPE_CHECKING:
    from rtpaudit.findings.rule import Rule

COLUMNS = "columns"
Name = Annotated[
    str | None,
    typer.Argument(
        metavar="[NAME]",
        help=f"A finding, a column, a table, or '{COLUMNS}' for all of these; all findings if left out.",
    ),
]


def explain(name: Name = None) -> int:
    """Say what a finding or a column means, how it is measured, its limit and where that is published."""
    # The catalogue is filled by the rules of that package.
    from rtpaudit.findings import CATALOGUE
    from rtpaudit.findings.rule import GROUPS

    if name is None:
        groups = [
            "\n".join([bold(group), *(_entry(rule) for rule in CATALOGUE.values() if rule.group == group)])
            for group in GROUPS
        ]
        say("\n\n".join([*groups, _indented(f"Columns: rtpaudit explain {COLUMNS}")]))
    elif name in CATALOGUE:
        say(_page(CATALOGUE[name]))
    elif name == COLUMNS:
        say("\n\n".join(map(_table, TABLES)))
    elif name in TABLES:
        say(_table(name))
    else:
        say("\n\n".join(_homes(name)))
    return 0


def _entry(rule: "Rule") -> str:
    """One line of the list of findings: its name, and its limit."""
    limit = f"{rule.limit:g} {rule.unit}".rstrip()
    return fill(rule.means, width(), initial_indent=f"  {rule.name:24}", subsequent_indent=" " * 26) + f" [{limit}]"


def _page(rule: "Rule") -> str:
    paragraphs = [
        rule.means,
        f"Measured as: {rule.measured_as}.",
        f"Limit: {rule.limit:g} {rule.unit}".rstrip() + f" ({rule.basis}); a profile may change it.",
        f"Severity: {rule.severity}.",
        f"Check next: {rule.check_next}",
    ]
    return "\n".join([bold(rule.name) + f"  a finding about the {rule.group}", *map(_indented, paragraphs)])


def _homes(name: str) -> Iterator[str]:
    """The column in each table that has it."""
    homes = [(table, one) for table, columns in TABLES.items() for one in columns if one.name == name]
    if not homes:
        raise UnusableArguments(f"nothing is called {visible(name)!r}; {_near(name)}`rtpaudit explain` lists all names")
    for table, column in homes:
        kind = f"{KINDS[column.kind]} [{column.unit}]" if column.unit else KINDS[column.kind]
        paragraphs = [column.meaning, f"Source: {column.source}"]
        yield "\n".join([bold(f"{column.name}") + f"  in {table}: {kind}", *map(_indented, paragraphs)])


def _near(name: str) -> str:
    from difflib import get_close_matches

    from rtpaudit.findings import CATALOGUE

    known = {one.name for columns in TABLES.values() for one in columns} | set(TABLES) | set(CATALOGUE) | {COLUMNS}
    near = get_close_matches(name, sorted(known), n=3)
    return f"did you mean {', '.join(near)}? " if near else ""


def _table(table: str) -> str:
    return "\n".join([bold(f"{table}.csv, {table}.parquet"), *map(_row, TABLES[table])])


def _row(column: Column) -> str:
    name = f"  {column.name}  "
    return fill(column.meaning, width(), initial_indent=f"{name:26}", subsequent_indent=" " * 26)


def _indented(text: str) -> str:
    return fill(text, width(), initial_indent="  ", subsequent_indent="  ")
