"""Writes docs/measures.md out of the tables in the code: columns, codec values, bands, look-ahead."""

import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
sys.path.insert(0, str(ROOT))

from rtpaudit.columns import TABLES, Column  # noqa: E402
from rtpaudit.emodel import g109, g113, look_ahead  # noqa: E402

INTRODUCTION = """\
# What is measured

<!-- Made by docs/make_measures.py: edit the tables in rtpaudit/ and run it again. -->

Every column of every table, with its meaning and the published text that defines it. A name ends in its unit: `_ms`,
`_s`, `_hz`, `_pct` (0 to 100), `_ppm`, `_dbov`, `_dbm0`, `_packets`. An empty cell means that there is no value, never
0. Times are UTC. A source marked "from memory" was not seen in print by us. Where print leaves room,
[decisions.md](decisions.md) says what was decided.
"""

ABOUT = {
    "calls": "One row per call leg; `conversation` joins the legs of one conversation.",
    "streams": "One row per stream: one SSRC one way between two address-and-port pairs.",
    "gaps": "One row per run of missing sequence numbers.",
    "windows": "One row per stream and 2 s of its time. Windows add up to the stream.",
    "findings": "One row per cause that was found.",
    "signalling": "One row per message.",
    "events": "One row per telephone event.",
    "reports": "One row per report of a far receiver.",
    "damage": "One row per place at which a capture could not be read.",
}


def document() -> str:
    """The whole text."""
    tables = [section(name, columns) for name, columns in TABLES.items()]
    return "\n".join([INTRODUCTION, *tables, codecs(), bands(), delays()])


def section(name: str, columns: tuple[Column, ...]) -> str:
    """One table of the report."""
    rows = [(f"`{one.name}`", kind(one), one.meaning, one.source) for one in columns]
    return f"## {name}\n\n{ABOUT[name]}\n\n" + table(("column", "holds", "meaning", "source"), rows)


def kind(column: Column) -> str:
    """What a column holds, in words."""
    word = column.kind.replace("yes_no", "yes or no")
    return f"{word}, {column.unit}" if column.unit and column.unit not in (word, "UTC") else word


def codecs() -> str:
    """Ie and Bpl."""
    rows = [
        (f"`{row.encoding}`", f"{row.Ie:g}", "" if row.Bpl is None else f"{row.Bpl:g}", row.condition, source(row))
        for row in g113.ROWS + g113.NOT_CONCEALED
    ]
    return "## Ie and Bpl per encoding\n\n" + table(("encoding", "Ie", "Bpl", "condition", "source"), rows)


def source(row: g113.Impairment) -> str:
    """Where a codec's values come from, and how they are known."""
    return f"{row.source}; {row.how_known}"


def bands() -> str:
    """Words for R."""
    edges = [f"below {g109.EDGES[0]:g}", *(f"{edge:g} and more" for edge in g109.EDGES)]
    rows = list(zip(edges, g109.BANDS, strict=True))[::-1]
    return "## Quality bands\n\nITU-T G.109 (09/1999), Table 1.\n\n" + table(("R", "band"), rows)


def delays() -> str:
    """Look-ahead."""
    rows = [(f"`{row.encoding}`", f"{row.milliseconds:g}", row.source) for row in look_ahead.ROWS]
    text = "Part of `one_way_delay_ms`. An encoding that is not listed adds nothing.\n\n"
    return "## Look-ahead of the codec\n\n" + text + table(("encoding", "ms", "source"), rows)


def table(heads: tuple[str, ...], rows: list[tuple[str, ...]]) -> str:
    """A table in Markdown."""
    lines = [heads, ("---",) * len(heads), *rows]
    return "\n".join("| " + " | ".join(cell.replace("|", "\\|") for cell in line) + " |" for line in lines) + "\n"


if __name__ == "__main__":
    (ROOT / "docs" / "measures.md").write_text(document(), "utf-8")
