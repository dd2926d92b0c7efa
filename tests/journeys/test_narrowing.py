"""A capture narrowed to some of its calls tells of them what the whole audit tells."""

import json
import subprocess

import pandas as pd
import pytest

import rtpaudit
from rtpaudit import Selection
from rtpaudit.columns import TABLES
from rtpaudit.errors import NothingChosen
from tests.journeys.conftest import CAPTURES, Command

TWO_LEGS = CAPTURES / "proxy-two-legs.mon.pcap"
DIGITS = CAPTURES / "dtmf-rfc4733.b-any-sll.pcap"


@pytest.fixture(scope="module")
def whole() -> rtpaudit.Audit:
    return rtpaudit.audit(TWO_LEGS)


def of_calls(table: pd.DataFrame, calls: list[str], streams: list[str]) -> pd.DataFrame:
    kept = table.call.isin(calls) if "call" in table else table.stream.isin(streams)
    return table[kept].reset_index(drop=True)


@pytest.mark.parametrize(
    ("wanted", "calls"),
    [
        (Selection(calls=("c02",)), ["c02"]),
        (Selection(parties=("desk-203",)), ["c03", "c04"]),
        (Selection(parties=("desk-201", "desk-202"), calls=("c1", "c3")), ["c01"]),
        (Selection(at="2026-12-01T05:56:00Z"), ["c01", "c02"]),
    ],
)
def test_ids_and_figures_are_those_of_the_whole_audit(
    whole: rtpaudit.Audit, wanted: Selection, calls: list[str]
) -> None:
    narrowed = rtpaudit.audit(TWO_LEGS, select=wanted)
    assert narrowed.calls.call.tolist() == calls
    streams = whole.streams.stream[whole.streams.call.isin(calls)].tolist()
    assert streams
    for name in set(TABLES) - {"damage"}:
        pd.testing.assert_frame_equal(narrowed.tables[name], of_calls(whole.tables[name], calls, streams))


def test_nothing_else_is_measured(monkeypatch: pytest.MonkeyPatch, whole: rtpaudit.Audit) -> None:
    import rtpaudit.assess as room

    measured: list[str] = []
    bench = room.measure

    def noting(stream, *more):
        measured.append(stream.id)
        return bench(stream, *more)

    monkeypatch.setattr(room, "measure", noting)
    rtpaudit.audit(TWO_LEGS, select=Selection(calls=("c03",)))
    assert sorted(measured) == sorted(whole.streams.stream[whole.streams.call == "c03"])


def test_a_party_of_no_call_is_an_error_that_names_the_nearest() -> None:
    with pytest.raises(NothingChosen) as caught:
        rtpaudit.audit(TWO_LEGS, select=Selection(parties=("desk-2003",)))
    assert {one.id for one in caught.value.nearest} == {"c01", "c02", "c03", "c04"}


def test_the_address_said_to_be_near_tells_the_end_of_each_call() -> None:
    audit = rtpaudit.audit(TWO_LEGS, near="192.0.2.10")
    ends = {call.id: call.near for call in audit.assessment.calls}
    assert set(ends.values()) == {"caller", "unknown"}
    assert all((near == "caller") == (call == "c01") for call, near in ends.items())


@pytest.fixture(scope="module")
def narrowed(command: Command) -> subprocess.CompletedProcess[str]:
    return command("triage", TWO_LEGS, "--call", "c04", "--out", "narrowed", "--json")


def test_the_report_holds_the_chosen_call_alone(narrowed: subprocess.CompletedProcess[str], place) -> None:
    assert narrowed.returncode == 0, narrowed.stderr
    summary = json.loads(narrowed.stdout)
    assert [call["call"] for call in summary["calls"]] == ["c04"]
    assert summary["calls_in_all"] == 4
    assert {path.name.split("-")[0].split(".")[0] for path in (place / "narrowed" / "audio").iterdir()} == {"c04"}


def test_a_time_that_fits_no_call_is_status_2_and_one_line(command: Command, place) -> None:
    result = command("triage", TWO_LEGS, "--at", "2026-12-01 07:00", "--zone", "UTC", "--out", "none")
    assert (result.returncode, result.stdout, result.stderr.count("\n")) == (2, "", 1)
    assert "nearest are c0" in result.stderr
    assert not (place / "none").exists()


def test_an_excerpt_can_be_passed_on_and_read_again(command: Command, place) -> None:
    result = command(
        "triage", TWO_LEGS, "--party", "desk-203", "--excerpt", "desk.pcapng", "--out", "first", "--json", "--quiet"
    )
    assert result.returncode == 0, result.stderr
    assert json.loads(result.stdout)["excerpt"] == ["desk.pcapng"]
    again = command("triage", "desk.pcapng", "--out", "second", "--json")
    before, after = (json.loads(one.stdout)["calls"] for one in (result, again))
    assert [call["r_factor"] for call in before] == [call["r_factor"] for call in after]
    assert [call["call_id"] for call in before] == [call["call_id"] for call in after]


def test_digits_are_masked_unless_asked_for(command: Command, place) -> None:
    for name, more in (("masked", ()), ("shown", ("--digits",))):
        assert command("triage", DIGITS, "--quiet", "--out", name, *more).returncode == 0
    masked, shown = (pd.read_csv(place / name / "events.csv", dtype="string") for name in ("masked", "shown"))
    assert masked.digit.tolist() == ["x"] * len(shown)
    assert "".join(shown.digit) == "4739#0*ABCD"
