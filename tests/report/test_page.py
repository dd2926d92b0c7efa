"""The page as it is written: which calls stand in it, in which order, and how large it grows."""

import html
import json
import re
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pytest

from rtpaudit.report import page
from rtpaudit.report.folder import CAUTION, write_folder
from rtpaudit.report.shell import library
from rtpaudit.report.tables import build_tables
from tests.report import made
from tests.report.many_calls import many_calls

HOSTILE = "</script><script>alert(1)</script><img src=x onerror=alert(1)>"


def block(text: str, name: str) -> Any:
    """A block of JSON in the page."""
    return json.loads(re.search(rf'<script type="application/json" id="{name}">(.*?)</script>', text)[1])


def written(audit: Any, place: Path, **options: Any) -> str:
    write_folder(audit, place, zone=ZoneInfo("UTC"), **options)
    return (place / "index.html").read_text("utf-8")


def order(text: str) -> list[str]:
    return [cells[0] for cells in block(text, "audit-data")["calls"]]


def audited(**tables: Any) -> made.Audited:
    audit = made.Audited()
    audit.tables = build_tables(audit.assessment, **tables)
    return audit


def test_the_worst_call_comes_first_and_is_there_in_full(tmp_path: Path) -> None:
    text = written(made.Audited(), tmp_path / "out")
    assert order(text) == ["c02", "c01"]
    view = block(text, "call-c02")
    assert [one["id"] for one in view["streams"]] == ["s03", "s04"]
    assert [one["ear"] for one in view["streams"]] == ["callee", "caller"]
    assert view["streams"][1]["gaps"] == [[2020.0, 240.0, 12]]
    assert not (tmp_path / "out" / "calls").exists()


def test_a_grave_finding_that_the_rating_does_not_see_goes_before_a_fair_rating(tmp_path: Path) -> None:
    blind = made.row("findings", finding="one-way-media", call="c01", severity="fault", says="Nothing.")
    assert order(written(audited(findings=[blind]), tmp_path / "out")) == ["c01", "c02"]


def test_a_finding_that_the_rating_holds_changes_no_order(tmp_path: Path) -> None:
    seen = made.row("findings", finding="load", call="c01", severity="fault", r_points=6.0, says="Load.")
    assert order(written(audited(findings=[seen]), tmp_path / "out")) == ["c02", "c01"]


def test_rows_of_all_tables_reach_their_call(tmp_path: Path) -> None:
    audit = audited(
        findings=[made.row("findings", finding="load", call="c02", stream="s04", says="Load.", from_s=1.0)],
        signalling=[made.row("signalling", call="c02", message="INVITE", time_ns=made.BEGIN_NS + 61 * made.SECOND)],
        events=[made.row("events", call="c02", stream="s03", event="digit", digit="5")],
        reports=[made.row("reports", call="c02", stream="s03", report="receiver", loss_pct=1.5)],
    )
    view = block(written(audit, tmp_path / "out"), "call-c02")
    assert view["findings"][0]["says"] == "Load."
    assert view["messages"]["rows"][0] | {"from": None} == {
        "from": None, "to": None, "message": "INVITE", "line": None, "transport": None, "repeated": None, "at": 1000.0,
    }  # fmt: skip
    assert view["events"]["rows"][0]["digit"] == "5"
    assert view["reports"]["rows"][0]["loss_pct"] == 1.5
    assert block(written(audit, tmp_path / "out"), "call-c01")["messages"]["rows"] == []


def test_of_too_many_messages_the_first_and_the_last_are_shown(tmp_path: Path) -> None:
    rows = [
        made.row("signalling", call="c02", message=f"M{k}", time_ns=made.BEGIN_NS + k * made.SECOND)
        for k in range(1900)
    ]
    told = block(written(audited(signalling=rows), tmp_path / "out"), "call-c02")["messages"]
    names = [row["message"] for row in told["rows"]]
    assert (len(names), names[0], names[-1], told["in_all"]) == (1000, "M0", "M1899", 1900)


def test_a_hostile_name_stays_text_wherever_it_stands(tmp_path: Path) -> None:
    audit = made.Audited()
    for one in audit.assessment.calls:
        one.caller = HOSTILE
    audit.assessment.captures[0] = HOSTILE
    audit.tables = build_tables(
        audit.assessment, findings=[made.row("findings", finding="load", call="c02", says=HOSTILE, check_next=HOSTILE)]
    )
    text = written(audit, tmp_path / "out")
    assert "<img" not in text
    assert len(re.findall("<script", text)) == len(re.findall("</script", text)) == 2 + 3
    assert block(text, "audit-data")["calls"][0][3] == HOSTILE
    assert html.escape(HOSTILE) in text


def test_octets_that_are_no_text_do_not_stop_the_page(tmp_path: Path) -> None:
    audit = made.Audited()
    audit.assessment.captures[0] = "call\udcff.pcap"
    assert "<h1>call?.pcap</h1>" in written(audit, tmp_path / "out")


def test_a_private_page_names_nobody_and_has_no_sound(tmp_path: Path) -> None:
    text = written(made.Audited(), tmp_path / "out", private=True)
    assert "192.0.2.10" not in text
    assert block(text, "audit-data")["sound"] == "nowhere"
    assert block(text, "call-c02")["streams"][0]["sound"]["files"] == {}
    assert block(text, "call-c02")["facts"]["caller"].startswith("host-")


def test_a_single_file_holds_every_call_and_its_sound(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(page, "IN_FULL", 1)
    text = written(made.Audited(), tmp_path / "out", single_file=True)
    assert not (tmp_path / "out" / "calls").exists()
    assert block(text, "call-c01")
    names = re.findall(r'<script type="text/plain" id="sound-([\w-]+)">', text)
    assert sorted(names) == sorted(
        f"{call}-{kind}" for call in ("c01-s01", "c01-s02", "c02-s03", "c02-s04") for kind in ("sent", "heard")
    )


def test_a_single_file_takes_the_sound_of_the_worst_calls_as_long_as_there_is_room(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(page, "MOST_INSIDE", 10)
    text = written(made.Audited(), tmp_path / "out", single_file=True)
    assert set(re.findall(r'id="sound-(c\d+)', text)) == {"c02"}


def test_calls_without_room_have_files_of_their_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(page, "IN_FULL", 1)
    text = written(made.Audited(), tmp_path / "out")
    assert 'id="call-c01"' not in text
    own = (tmp_path / "out" / "calls" / "c01.js").read_text("utf-8")
    assert json.loads(re.fullmatch(r"rtpauditCall\((.*)\);\n", own)[1])["id"] == "c01"


def test_an_empty_audit_has_a_page_too(tmp_path: Path) -> None:
    audit = made.Audited(made.Assessment(captures=["nothing.pcap"]))
    text = written(audit, tmp_path / "out")
    assert "No call was found." in text
    assert "nothing.pcap" in text


def test_damage_caution_and_zone_are_told(tmp_path: Path) -> None:
    text = written(made.Audited(), tmp_path / "out")
    assert "complaint.pcap, octet 4242: a record that the file ends within. Lost: 1 frame." in text
    assert html.escape(CAUTION) in text
    assert "2023-11-14 22:13:20 to 22:13:30 · UTC" in text


def test_without_scripts_every_call_still_has_its_sentence(tmp_path: Path) -> None:
    text = written(made.Audited(), tmp_path / "out")
    overview = text[text.index('<section class="overview"') : text.index("</section>")]
    assert re.findall(r"<strong>(c\d+)</strong>", overview) == ["c02", "c01"]
    assert "The caller heard poor speech: 2.4 % of the packets were lost." in overview


def test_five_hundred_calls_fit_three_megabytes_besides_the_library(tmp_path: Path) -> None:
    audit = many_calls(500)
    text = written(audit, tmp_path / "out", audio=False)
    assert len(text.encode()) - len(library().encode()) < 3_000_000
    assert len(order(text)) == 500
    assert len(re.findall('<script type="application/json" id="call-', text)) == page.IN_FULL
    assert len(list((tmp_path / "out" / "calls").iterdir())) == 500 - page.IN_FULL
