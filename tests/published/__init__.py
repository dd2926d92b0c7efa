"""Numbers as printed, one table a file; each row names its source and how it is known."""

import csv
from pathlib import Path


def published_rows(table: str) -> list[dict[str, str]]:
    """Rows of one table in this folder."""
    with (Path(__file__).parent / f"{table}.csv").open(newline="") as file:
        return list(csv.DictReader(file))
