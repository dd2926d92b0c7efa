"""Nights as a scheduler runs them: processes that are killed, captures that kill, and pages read in the morning."""

import json
import os
import random
import re
import signal
import subprocess
import sys
import time
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import pandas as pd
import pytest

from tests.journeys.conftest import CAPTURES
from tests.nightly.made import START_NS, call_octets, write_calls
from tests.nightly.runs import pending, rows

ROOT = CAPTURES.parents[1]
CALLS = 32
"""of each route and night"""
DAY_NS = 86_400_000_000_000
PCAP_HEADER = 24
PROFILE = """
[[routes]]
name = "north"
addresses = ["192.0.2.0/24"]
[[routes]]
name = "south"
addresses = ["203.0.113.0/24"]
"""


def begin(place: Path, *arguments: object, code: str = "") -> subprocess.Popen[str]:
    """A command in the background; ``code`` runs before it, to make things break."""
    program = f"import sys; from rtpaudit.cli import main\n{code}\nif __name__ == '__main__': sys.exit(main())"
    script = place / "command.py"
    script.write_text(program)
    return subprocess.Popen(
        [sys.executable, str(script), "nightly", *map(str, arguments)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        cwd=place,
        env=os.environ | {"PYTHONPATH": str(ROOT), "XDG_STATE_HOME": str(place / "state")},
    )


def nightly(place: Path, *arguments: object, code: str = "") -> subprocess.CompletedProcess[str]:
    process = begin(place, *arguments, "--settle", "0", code=code)
    out, err = process.communicate(timeout=300)
    return subprocess.CompletedProcess(process.args, process.returncode, out, err)


@pytest.fixture(scope="module")
def nights(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Eight quiet nights of calls, and a ninth in which the south loses packets."""
    place = tmp_path_factory.mktemp("nights")
    (place / "in" / "last").mkdir(parents=True)
    for night in range(9):
        for name, caller, loss in (("n", "192.0.2.10", 0.002), ("s", "203.0.113.10", 0.08 if night == 8 else 0.002)):
            octets = []
            for k in range(CALLS):
                start = START_NS + night * DAY_NS + k * 60_000_000_000
                seed, ends = 1000 * night + k, {"caller": caller, "callee": "198.51.100.7"}
                octets.append(call_octets(seed, 1.5, start_ns=start, loss=loss, **ends))
            if night < 8:
                # One capture holds a whole evening; its calls follow each other.
                evening = octets[0] + b"".join(one[PCAP_HEADER:] for one in octets[1:])
                (place / "in" / f"{night}-{name}.pcap").write_bytes(evening)
            else:
                for k, one in enumerate(octets):
                    (place / "in" / "last" / f"{name}-{k:02d}.pcap").write_bytes(one)
    (place / "site.toml").write_text(PROFILE)
    (place / "limits.toml").write_text(
        "[all]\nleast_calls = 50\n[routes.south]\nloss_over_1_pct = 60\n[routes.north]\nr_median = 50\n"
    )
    given = ("in", "--store", "store", "--zone", "UTC", "--profile", "site.toml", "--limits", "limits.toml")
    (place / "in" / "last").rename(place / "last")
    before = nightly(place, *given, "--reports", "0")
    assert before.returncode == 0, before.stderr
    (place / "last").rename(place / "in" / "last")
    result = nightly(place, *given, "--reports", "2", "--audio", "worst:1")
    (place / "said.json").write_text(json.dumps([result.returncode, result.stdout, result.stderr]))
    return place


LAST = "night=2026-03-09"


class Page(HTMLParser):
    """Text and links of a page."""

    def __init__(self, path: Path) -> None:
        super().__init__()
        self.text: list[str] = []
        self.links: list[str] = []
        self.feed(path.read_text("utf-8"))
        self.words = re.sub(r"\s+", " ", " ".join(self.text))

    def handle_data(self, data: str) -> None:
        self.text.append(data)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.links += [value for name, value in attrs if tag == "a" and name == "href" and value]


def test_a_broken_limit_ends_with_1_and_a_line_with_name_figure_and_sample_size(nights: Path) -> None:
    status, out, err = json.loads((nights / "said.json").read_text())
    assert status == 1, err
    (line,) = [one for one in err.splitlines() if "2026-03-09" in one]
    assert re.search(r"route south: loss_over_1_pct is \d+(\.\d+)?, the limit is 60 \(32 calls\)", line)
    assert "64 calls in 64 captures." in out
    assert "Night 2026-03-09: 1 limit is broken; " in out


def test_the_store_is_read_by_pandas_as_it_lies_there(nights: Path) -> None:
    calls = pd.concat([pd.read_parquet(path) for path in sorted((nights / "store").glob("night=*/calls-*.parquet"))])
    assert len(calls) == 576
    assert calls.groupby("route").size().to_dict() == {"north": 288, "south": 288}


def test_the_queries_of_the_documentation_run(nights: Path) -> None:
    duckdb = pytest.importorskip("duckdb")
    text = (ROOT / "docs" / "nightly.md").read_text("utf-8")
    queries = re.findall(r"```sql\n(.*?)```", text, re.DOTALL)
    assert queries
    for query in queries:
        assert duckdb.sql(query.replace("STORE", str(nights / "store"))).fetchall(), query


def test_breaches_stand_first_then_changes_then_the_worst_calls(nights: Path) -> None:
    page = Page(nights / "store" / LAST / "index.html")
    places = [page.words.index(heading) for heading in ("Limits", "What changed", "Worst calls", "By route", "Traffic")]
    assert places == sorted(places)
    assert re.search(r"Broken\. route south: loss_over_1_pct", page.words)
    assert re.search(r"What changed .*route south.* lost more than 1 %, worse", page.words)
    assert "route north lost" not in page.words


def test_the_worst_calls_lead_to_their_pages_and_one_has_its_sound(nights: Path) -> None:
    folder = nights / "store" / LAST
    links = [one for one in Page(folder / "index.html").links if one.startswith("calls/")]
    assert len(links) == 2
    for link in links:
        assert (folder / link).is_file()
    assert len(list(folder.glob("calls/*/audio"))) == 1
    report = json.loads((folder / links[0]).with_name("audit.json").read_bytes())
    assert len(report["calls"]) == 1


def test_collectors_find_the_latest_night_at_one_place(nights: Path) -> None:
    (suite,) = ElementTree.parse(nights / "store" / "limits.junit.xml").getroot()
    assert (suite.get("name"), suite.get("failures")) == ("night 2026-03-09", "1")
    metrics = (nights / "store" / "figures.openmetrics.txt").read_text()
    assert 'rtpaudit_calls{route="south"} 32' in metrics
    assert metrics == (nights / "store" / LAST / "figures.openmetrics.txt").read_text()


def test_pages_are_rebuilt_from_the_store_alone(nights: Path) -> None:
    page = nights / "store" / LAST / "index.html"
    before = page.read_text()
    page.unlink()
    (nights / "in").rename(nights / "away")
    try:
        result = nightly(nights, "--show", "store", "--zone", "UTC", "--limits", "limits.toml")
    finally:
        (nights / "away").rename(nights / "in")
    assert result.returncode == 1, result.stderr
    assert "9 pages written." in result.stdout
    assert page.read_text() == before


def test_a_second_run_says_that_nothing_is_new(nights: Path) -> None:
    result = nightly(nights, "in", "--store", "store", "--zone", "UTC", "--profile", "site.toml", "--json")
    assert result.returncode == 0, result.stderr
    assert json.loads(result.stdout)["captures"] == 0


def test_kill_9_at_any_moment_loses_nothing_and_counts_nothing_twice(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 60, 2.0)
    code = "from rtpaudit.nightly import batch; batch.COMMIT_CAPTURES = 5; batch.MOST_IN_PIECE = 3"
    arguments = ("in", "--store", "store", "--zone", "UTC", "--settle", "0", "--reports", "0")
    draw = random.Random(1)
    for _ in range(3):
        process = begin(tmp_path, *arguments, code=code)
        time.sleep(draw.uniform(1.5, 4.0))
        process.send_signal(signal.SIGKILL)
        process.communicate()
    result = nightly(tmp_path, *arguments[:-4], "--reports", "0")
    assert result.returncode == 0, result.stderr
    assert sorted(row["capture"] for row in rows(tmp_path / "store", "calls")) == sorted(
        f"call-{k:05d}.pcap" for k in range(60)
    )
    assert len(rows(tmp_path / "store", "captures")) == 60
    assert not pending(tmp_path / "store")


POISON = """
from rtpaudit import walk
from rtpaudit.nightly import engine
original = walk.audit
def audit(*paths, **given):
    name = str(paths[0]).rsplit("/", 1)[-1]
    if "kills" in name:
        import os, signal
        os.kill(os.getpid(), signal.SIGSEGV)
    if "eats" in name:
        import numpy
        eaten = [numpy.ones(1 << 26, numpy.uint8) for _ in range(16)]
    if "breaks" in name:
        raise ZeroDivisionError("by nothing")
    if "stays" in name:
        import time
        time.sleep(600)
    return original(*paths, **given)
walk.audit = audit
engine.LEAST_TIME_S = 3.0
"""


def test_what_kills_eats_breaks_or_stays_costs_itself_alone(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 30, 1.0)
    for number, name in enumerate(("kills", "eats", "breaks", "stays")):
        (tmp_path / "in" / f"call-00011-{name}.pcap").write_bytes(call_octets(500 + number, 1.0))
    result = nightly(
        tmp_path, "in", "--store", "store", "--zone", "UTC", "--reports", "0", "--memory", "300M", code=POISON
    )
    assert result.returncode == 0, result.stderr
    failed = {row["capture"].removeprefix("call-00011-"): row["reason"]
              for row in rows(tmp_path / "store", "captures") if row["status"] == "failed"}  # fmt: skip
    assert failed == {
        "kills.pcap": "ended its worker process (SIGSEGV)",
        "eats.pcap": "needs more memory than a worker may take",
        "breaks.pcap": "a fault of rtpaudit itself: ZeroDivisionError: by nothing",
        "stays.pcap": "took longer than its time",
    }
    assert len(rows(tmp_path / "store", "calls")) == 30
    # They lie in the night of their last change, as no packet of theirs was read.
    words = " ".join(Page(path).words for path in (tmp_path / "store").glob("night=*/index.html"))
    assert "Captures that failed" in words
    assert "kills.pcap ended its worker process (SIGSEGV)" in words


def test_two_runs_at_once_do_all_and_nothing_twice(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 40, 1.0)
    arguments = ("in", "--store", "store", "--zone", "UTC", "--settle", "0", "--reports", "0", "--jobs", "1")
    runs = [begin(tmp_path, *arguments) for _ in range(2)]
    said = [one.communicate(timeout=300) for one in runs]
    assert [one.returncode for one in runs] == [0, 0], said
    assert len(rows(tmp_path / "store", "calls")) == 40
    assert len(rows(tmp_path / "store", "captures")) == 40
    assert not pending(tmp_path / "store")


def test_a_sample_says_so_and_its_figures_carry_intervals(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 60, 1.0, loss=0.02)
    result = nightly(
        tmp_path, "in", "--store", "store", "--zone", "UTC", "--share", "50%", "--seed", "4", "--reports", "0"
    )
    assert result.returncode == 0, result.stderr
    page = Page(next((tmp_path / "store").glob("night=*/index.html")))
    assert "A sample: 30 of 60 captures were audited." in page.words
    assert re.search(r"\d+(\.\d+)? % \d+(\.\d+)? to \d+", page.words)


def test_an_address_is_fetched_capture_by_capture(tmp_path: Path) -> None:
    pytest.importorskip("fsspec")
    write_calls(tmp_path / "in", 3, 1.0)
    source = f"file://{tmp_path / 'in'}"
    result = nightly(tmp_path, source, "--store", "store", "--zone", "UTC", "--reports", "1")
    assert result.returncode == 0, result.stderr
    assert sorted(row["capture"] for row in rows(tmp_path / "store", "calls")) == [
        f"call-{k:05d}.pcap" for k in range(3)
    ]
    assert len(list((tmp_path / "store").glob("night=*/calls/*/index.html"))) == 1
    assert "Nothing new." in nightly(tmp_path, source, "--store", "store", "--zone", "UTC").stdout


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ((), "needs sources and --store"),
        (("in",), "needs sources and --store"),
        (("--show", "in"), "no store of nights"),
        (("missing", "--store", "store"), "there is no such file or folder"),
        (("in", "--store", "in"), "no store of nights"),
        (("in", "--store", "s", "--share", "5"), "--share 5 is no share"),
        (("in", "--store", "s", "--share", "5%", "--calls", "3"), "give one of them"),
        (("in", "--store", "s", "--by", "route"), "--by says how a sample is drawn"),
        (("in", "--store", "s", "--keep", "soon"), "--keep 'soon' is no time"),
        (("in", "--store", "s", "--audio", "all"), "write it as worst:20"),
        (("in", "--store", "s", "--private", "--names"), "--private keeps neither"),
        (("in", "--store", "s", "--memory", "lots"), "--memory 'lots' is no amount"),
        (("in", "--store", "s", "--key", "s/key"), "lies in the store"),
        (("s3://nowhere", "--store", "s"), "s3://nowhere"),
    ],
)
def test_what_cannot_be_meant_is_one_line_and_status_2(tmp_path: Path, arguments: tuple[str, ...], said: str) -> None:
    write_calls(tmp_path / "in", 1, 0.1)
    result = nightly(tmp_path, *arguments)
    assert result.returncode == 2
    assert result.stdout == ""
    assert result.stderr.count("\n") == 1
    assert said in result.stderr
