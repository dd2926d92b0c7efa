"""The import order: each room imports only from rooms that stand before it."""

import ast
import subprocess
import sys

import pytest

from tests.sources import PACKAGE, ROOT, Import, Source, imports_of, package_imports, package_sources, room_of

FLOOR = ("errors", "serial", "units", "kernels", "columns", "planning", "route", "profile")
BENCHES = ("codecs", "metrics", "playout", "emodel", "audio")
ROOMS = ("capture", "decode", "signalling", "media", "assess", "findings", "report", "walk", "listen", "nightly", "cli")
ORDER = {name: place for place, name in enumerate(FLOOR + BENCHES + ROOMS)}
DRAWN = "floor < benches < " + " < ".join(ROOMS)

# Packages that take long to load: only inside the functions that need them, but for rooms off the way of triage.
HEAVY = {"pandas", "pyarrow", "scapy", "scipy", "soundfile", "rich", "bokeh", "jinja2", "dask", "distributed", "fsspec"}
MAY_BE_HEAVY = {"listen", "nightly"}
# The decorator of all kernels, and the one thing that numba's arrays do too slowly: big-endian reads from memory.
MAY_USE_NUMBA = {f"{PACKAGE}.kernels", f"{PACKAGE}.decode.octets"}


def complaint_about(found: Import) -> str:
    """What is wrong with one import and what to do instead, "" where it is right."""
    where = f"{found.source.at(found.node)}: {found.source.module} imports {found.target}"
    if found.target.startswith("."):
        return f"{where}, which is relative: write the full name, {PACKAGE}.…"
    top = found.target.split(".")[0]
    if top != PACKAGE:
        return complaint_about_library(found, top, where)
    if found.for_types and found.source.module == PACKAGE:
        return ""
    here, there = found.source.room, room_of(found.target)
    if there == "cli" and here not in ("__main__", "cli"):
        return f"{where}: only __main__.py imports cli"
    if here in ("", "__main__") or there in ("", here):
        return ""
    for room in (here, there):
        if room not in ORDER:
            return f"{where}, but the order of rooms does not know {room}: give it a place in tests/test_rooms.py"
    if here in BENCHES and there in BENCHES:
        return f"{where}, but a bench imports no other bench: let assess hand the numbers over, or move it to the floor"
    if ORDER[there] > ORDER[here]:
        return f"{where}, which stands after it ({DRAWN}): move what both need down, or hand it in as an argument"
    return ""


def complaint_about_library(found: Import, top: str, where: str) -> str:
    if top in ("numba", "llvmlite") and found.source.module not in MAY_USE_NUMBA:
        return f"{where}: import the decorator from {PACKAGE}.kernels instead"
    if top == "pandas" and ORDER.get(found.source.room, 0) < ORDER["report"] and found.source.room in ORDER:
        return f"{where}, but pandas appears first in report: keep to arrays here"
    if top in HEAVY and found.at_head and not found.for_types and found.source.room not in MAY_BE_HEAVY:
        return f"{where} as soon as it is loaded, which is slow: import it inside the function that needs it"
    return ""


def test_every_import_leads_downwards() -> None:
    complaints = [said for said in map(complaint_about, package_imports()) if said]
    assert not complaints, "\n" + "\n".join(complaints)


@pytest.mark.parametrize(("module", "line", "said"), [
    ("rtpaudit.emodel.g107", "from rtpaudit.metrics.loss import gaps", "a bench imports no other bench"),
    ("rtpaudit.capture.pcap", "from rtpaudit.media import streams", "which stands after it"),
    ("rtpaudit.capture.pcap", "def f():\n    import rtpaudit.report.folder", "which stands after it"),
    ("rtpaudit.errors", "from rtpaudit.planning import PARAMETERS", "which stands after it"),
    ("rtpaudit.report.page", "from rtpaudit.cli import main", "only __main__.py imports cli"),
    ("rtpaudit.media.calls", "from .streams import Stream", "which is relative"),
    ("rtpaudit.attic.box", "from rtpaudit.errors import RtpAuditError", "does not know attic"),
    ("rtpaudit.media.calls", "import pandas", "pandas appears first in report"),
    ("rtpaudit.report.tables", "import pandas as pd", "inside the function that needs it"),
    ("rtpaudit.metrics.jitter", "from numba import njit", "from rtpaudit.kernels"),
])  # fmt: skip
def test_a_wrong_import_is_told_with_file_line_and_remedy(module, line, said) -> None:
    (complaint,) = [complaint_about(found) for found in made_up(module, line)]
    assert said in complaint
    assert complaint.startswith(f"{module.replace('.', '/')}.py:{line.count(chr(10)) + 1}: ")


@pytest.mark.parametrize(("module", "line"), [
    ("rtpaudit.media.calls", "from rtpaudit.metrics.clock import skew"),
    ("rtpaudit.report.tables", "def frame():\n    import pandas"),
    ("rtpaudit.report.tables", "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    import pandas"),
    ("rtpaudit.nightly.trends", "import pandas"),
    ("rtpaudit.emodel.g107", "from rtpaudit.planning import PlanningValues"),
    ("rtpaudit.__main__", "from rtpaudit.cli import main"),
])  # fmt: skip
def test_a_right_import_is_left_in_peace(module, line) -> None:
    assert not any(complaint_about(found) for found in made_up(module, line))


def made_up(module: str, text: str) -> list[Import]:
    source = Source(ROOT / f"{module.replace('.', '/')}.py", module, text, ast.parse(text))
    return imports_of(source, {one.module for one in package_sources()})


def test_a_plain_import_loads_numpy_at_most() -> None:
    code = f"import sys, {PACKAGE}; print(*{{name.split('.')[0] for name in sys.modules}})"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT)
    assert not set(loaded.stdout.split()) & (HEAVY | {"numba", "typer"})
