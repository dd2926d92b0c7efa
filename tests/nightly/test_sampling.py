"""Samples: reproducible, by content, even within strata, and weighted back to the whole."""

from datetime import date
from pathlib import Path

import numpy as np
import pytest

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.groups import ALL, Group, summarise
from rtpaudit.nightly.identity import lot_of
from rtpaudit.nightly.reading import read_night
from rtpaudit.nightly.routing import Router
from rtpaudit.nightly.sampling import Candidate, Sampling, candidate, draw, parse_share
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.sources import Found, list_sources
from rtpaudit.nightly.store import Store
from rtpaudit.profile import Profile, Route
from tests.nightly.made import START_NS, call_octets, write_calls
from tests.nightly.runs import UTC, InThisProcess, rows, run

NORTH = Route("north", addresses=("192.0.2.0/25",))


def candidates(counts: dict[str, int], night: str = "2026-03-01") -> list[Candidate]:
    draw_ = np.random.default_rng(1)
    return [
        Candidate(Found(f"{name}-{k}", 1, 0), int(draw_.integers(2**63)), night, name)
        for name, count in counts.items()
        for k in range(count)
    ]


@pytest.mark.parametrize(("text", "share"), [("5%", 0.05), ("0.05", 0.05), ("100%", 1.0), ("1", 1.0), ("0.5%", 0.005)])
def test_a_share_is_written_as_people_do(text: str, share: float) -> None:
    assert parse_share(text) == pytest.approx(share)


@pytest.mark.parametrize("text", ["0", "0%", "101%", "-5%", "five", "", "nan", "%"])
def test_a_share_that_is_none_is_refused(text: str) -> None:
    with pytest.raises(UnusableArguments, match="--share"):
        parse_share(text)


def test_each_stratum_gives_its_share_and_none_is_passed_over() -> None:
    drawn, draws = draw(candidates({"a": 100, "b": 40, "c": 1}), Sampling(share=0.05))
    assert {one.stratum: (one.population, one.drawn) for one in draws} == {"a": (100, 5), "b": (40, 2), "c": (1, 1)}
    assert len(drawn) == 8


def test_a_number_is_shared_by_largest_remainders() -> None:
    """10 of 100, 40 and 1: exactly 7.09, 2.84 and 0.07, so 7, 2 and 0, and the one left goes to 2.84."""
    _, draws = draw(candidates({"a": 100, "b": 40, "c": 1}), Sampling(captures=10))
    assert [one.drawn for one in draws] == [7, 3, 0]


def test_no_more_is_drawn_than_there_is() -> None:
    drawn, _ = draw(candidates({"a": 3}), Sampling(captures=10))
    assert len(drawn) == 3


def test_the_lowest_lots_are_drawn_in_any_order_of_listing() -> None:
    there = candidates({"a": 50})
    forwards, _ = draw(there, Sampling(captures=5))
    backwards, _ = draw(there[::-1], Sampling(captures=5))
    assert forwards == backwards == sorted(there, key=lambda one: one.lot)[:5]


def test_a_lot_goes_with_the_content_and_the_seed() -> None:
    octets = call_octets(1, 1.0)
    assert lot_of(octets, len(octets), 1) == lot_of(octets, len(octets), 1)
    assert len({lot_of(octets, len(octets), seed) for seed in range(-5, 5)}) == 10
    assert lot_of(octets, len(octets), 1) != lot_of(call_octets(2, 1.0), len(octets), 1)


def test_lots_are_drawn_evenly() -> None:
    lots = np.array([lot_of(k.to_bytes(4, "big"), 4, 0) for k in range(4000)], np.float64) / 2**64
    assert np.histogram(lots, 10, (0.0, 1.0))[0].min() > 320


@pytest.mark.parametrize("packed", [False, True])
def test_night_hour_and_route_are_seen_at_a_glance(tmp_path: Path, packed: bool) -> None:
    import gzip

    (tmp_path / "a.pcap").write_bytes(gzip.compress(call_octets(1, 20.0)) if packed else call_octets(1, 20.0))
    (found,) = list_sources([str(tmp_path)], 0.0).captures
    for by, stratum in (("", "all"), ("hour", "19 h"), ("route", "north")):
        one = candidate(found, Sampling(share=0.5, by=by), Router((NORTH,)), UTC)
        assert (one.night, one.stratum) == ("2026-03-01", stratum)


def test_a_route_by_number_is_seen_in_the_signalling_at_the_head() -> None:
    capture = Path(__file__).parents[2] / "fixtures" / "captures" / "clean-pcmu-udp.a.pcap"
    (found,) = list_sources([str(capture)], 0.0).captures
    from rtpaudit.walk import audit

    caller = str(audit(capture, sound=False).tables["calls"]["caller"][0])
    route = Route("theirs", numbers=(caller,)) if caller.isdigit() else Route("theirs", addresses=("0.0.0.0/0",))
    assert candidate(found, Sampling(share=0.5, by="route"), Router((route,)), UTC).stratum == "theirs"


def test_a_file_that_is_gone_draws_a_lot_all_the_same() -> None:
    one = candidate(Found("/nowhere/a.pcap", 9, START_NS), Sampling(share=0.5, by="route"), Router((NORTH,)), UTC)
    assert (one.night, one.stratum) == ("2026-03-01", "no route")


def test_a_stratified_sample_stands_for_the_whole(tmp_path: Path) -> None:
    """Twenty good calls north and five lossy ones elsewhere; a sample of each weighs them by what it was drawn from."""
    write_calls(tmp_path / "in", 20, 1.0)
    write_calls(tmp_path / "in", 5, 1.0, first=100, loss=0.4, caller="203.0.113.5")
    settings = AuditSettings(profile=Profile(routes=(NORTH,)), zone="UTC", key=b"k" * 32, profile_mark="p")
    sampling = Sampling(captures=10, seed=1, by="route")
    run(tmp_path / "store", [tmp_path / "in"], InThisProcess(settings=settings), settings, sampling)
    night = read_night(Store.open(tmp_path / "store"), date(2026, 3, 1))
    assert night.populations == {"north": 20, "no route": 5}
    assert (night.population, len(night.calls)) == (25, 10)
    assert night.calls["weight"].tolist() == [2.5] * 10
    whole = summarise(night, [], UTC).figures[Group(ALL, ALL)]
    assert whole["loss_over_1_pct"].interval.value == pytest.approx(100.0 * 5 / 25)
    assert {row["route"] for row in rows(tmp_path / "store", "calls")} == {"north", None}
