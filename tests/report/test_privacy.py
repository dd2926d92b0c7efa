"""Privacy: nothing tells who spoke, and still one can see that it was the same party."""

import re

import pandas as pd
import pytest

from rtpaudit.assess.results import Assessment
from rtpaudit.capture.frames import Damage
from rtpaudit.columns import TABLES
from rtpaudit.report.privacy import TREATMENT, Pseudonyms
from rtpaudit.report.tables import build_tables
from tests.report import made

KEY = bytes(range(32))
# Text columns that hold only words of ours.
HARMLESS = {
    "calls": {"call", "conversation", "outcome", "release_by", "quality_band", "headline"},
    "streams": {
        "stream", "call", "ssrc", "clock_basis", "match_basis", "delay_basis", "quality_band",
    },
    "gaps": {"stream"},
    "windows": {"stream"},
    "findings": {"finding", "call", "stream", "severity", "where", "unit", "basis"},
    "signalling": {"call", "protocol", "transport"},
    "events": {"call", "stream", "event", "carried_as"},
    "reports": {"call", "stream", "report", "reporter_ssrc"},
    "damage": set(),
}  # fmt: skip
SAYS = "ferry.desk at 192.0.2.10:4000 lost 1420 packets by 22:13:20."
SECRETS = ["+441632960142", "ferry.desk", "192.0.2.10", "198.51.100.20", "2001:db8::10", "a84b4c76e66710", "jones"]


def hidden() -> dict[str, pd.DataFrame]:
    there = made.stream("s01", "c01", capture="jones.pcap")
    back = made.stream("s02", "c01", capture="jones.pcap", **made.mirrored())
    six = made.stream("s03", source="2001:db8::10", destination="2001:db8::20", capture="jones.pcap")
    call = made.call(
        "c01", [there], [back], caller="+441632960142", callee="ferry.desk", call_id="a84b4c76e66710@192.0.2.10",
        capture="jones.pcap",
    )  # fmt: skip
    assessment = Assessment(
        captures=["jones.pcap"],
        streams=[there, back, six],
        calls=[call],
        damage=[
            Damage("jones.pcap", 5, "a message of +441632960142 from 2001:db8::10 breaks off", "1 frame of jones.pcap")
        ],
    )
    tables = build_tables(
        assessment,
        findings=[made.row("findings", call="c01", says=SAYS)],
        signalling=[
            made.row("signalling", call="c01", from_="192.0.2.10:5060", to="[2001:db8::10]:5060", call_id=call.call_id,
                     message="INVITE", line="INVITE sip:ferry.desk@198.51.100.20", capture="jones.pcap"),
        ],
        events=[made.row("events", call="c01", digit="7")],
        reports=[made.row("reports", call="c01", reporter="198.51.100.20")],
    )  # fmt: skip
    return Pseudonyms(KEY, ["jones.pcap"]).tables(tables)


@pytest.mark.parametrize("table", TABLES)
def test_each_text_column_is_either_treated_or_known_to_be_harmless(table: str) -> None:
    text = {column.name for column in TABLES[table] if column.kind == "text"}
    treated = set(TREATMENT.get(table, {}))
    assert treated | HARMLESS[table] == text
    assert not treated & HARMLESS[table]


@pytest.mark.parametrize("secret", SECRETS)
def test_no_table_names_a_party_an_address_a_dialog_or_a_file(secret: str) -> None:
    for frame in hidden().values():
        assert secret not in frame.to_csv()


def test_digits_and_the_lines_of_messages_go() -> None:
    tables = hidden()
    assert tables["events"].digit.isna().all()
    assert tables["signalling"].line.isna().all()


@pytest.mark.parametrize(
    ("text", "kept"),
    [
        ("486 Ann is busy", "486"),
        ("200", "200"),
        ("INVITE", "INVITE"),
        ("ANN", "other"),
        ("2 INVITE", "2 INVITE"),
        ("2 ANN", "2 other"),
        ("CRCX", "CRCX"),
        ("Transaction Add brine/1", "Transaction Add other/1"),
        ("PCMU/G722", "PCMU/G722"),
        ("PCMU/AnnsCodec", "PCMU/other"),
        ("unknown", "unknown"),
    ],
)
def test_of_words_from_outside_those_of_standards_are_kept(text: str, kept: str) -> None:
    assert Pseudonyms(KEY, []).standard(text) == kept


def test_calls_that_the_page_is_made_of_name_nobody_either() -> None:
    there = made.stream("s01", "c01")
    there.figures.rating_note = "G.113 Appendix I has no values for AnnsCodec"
    call = made.call(
        "c01", [there], [], caller="Ann", callee="192.0.2.10", call_id="ann@192.0.2.10", encoding="AnnsCodec"
    )
    (hidden_call,) = Pseudonyms(KEY, []).calls([call])
    assert not re.search("ann|192", repr(hidden_call.figures) + repr(hidden_call.streams[0].figures), re.IGNORECASE)
    told = (hidden_call.caller, hidden_call.callee, hidden_call.call_id, hidden_call.encoding)
    assert not any(re.search("ann|192", text, re.IGNORECASE) for text in told)
    assert there.figures.rating_note.endswith("AnnsCodec"), "the audit itself stays as it is"


def test_a_made_up_encoding_is_not_named_in_a_sentence_either() -> None:
    names = Pseudonyms(KEY, [])
    names.standard("AnnsCodec")
    assert names.words("G.113 Appendix I has no values for AnnsCodec") == "G.113 Appendix I has no values for other"


@pytest.mark.parametrize(
    "sentence",
    [
        f"a start line {'Ann'!r} of 3", "the sender's line " + repr("Ann's") + " ends", "it begins " + repr("Ann'\""),
        "its end is cut 'Ann", "it says 'Ann\\", "'Ann' first",
    ],
)  # fmt: skip
def test_what_a_sentence_quotes_is_emptied(sentence: str) -> None:
    said = Pseudonyms(KEY, []).words(sentence)
    assert "Ann" not in said
    assert "…" in said


def test_an_apostrophe_is_no_quotation() -> None:
    sentence = "cut short by the capture's snap length, not the senders' fault"
    assert Pseudonyms(KEY, []).words(sentence) == sentence


def test_the_same_party_keeps_one_pseudonym_in_all_tables() -> None:
    tables = hidden()
    host = tables["streams"].source[0]
    assert host.startswith("host-")
    assert tables["streams"].destination[1] == host
    assert tables["signalling"]["from"][0] == f"{host}:5060"
    assert host in tables["findings"].says[0]
    assert tables["calls"].callee[0] in tables["findings"].says[0]


def test_a_caller_known_by_address_alone_is_the_host_of_its_stream() -> None:
    tables = Pseudonyms(KEY, []).tables(build_tables(made.assessment()))
    assert tables["calls"].caller[0] == tables["streams"].source[0]


def test_figures_and_times_in_sentences_stay() -> None:
    assert hidden()["findings"].says[0].endswith("lost 1420 packets by 22:13:20.")


def test_a_short_extension_does_not_swallow_a_figure() -> None:
    names = Pseudonyms(KEY, [])
    names.party("142")
    assert names.words("lost 142 packets in 1.42 s") == "lost 142 packets in 1.42 s"


def test_a_name_of_several_words_is_found_in_a_sentence() -> None:
    names = Pseudonyms(KEY, [])
    pseudonym = names.party("ferry desk, east")
    assert names.words("The call to ferry desk, east broke off.") == f"The call to {pseudonym} broke off."


@pytest.mark.parametrize("address", ["192.0.2.10", "2001:db8::10", "::ffff:192.0.2.10"])
@pytest.mark.parametrize("sentence", ["{}", "({}),", "at {}.", "from {} on"])
def test_addresses_are_found_in_sentences_without_having_been_met(address: str, sentence: str) -> None:
    said = Pseudonyms(KEY, []).words(sentence.format(address))
    assert "192.0.2.10" not in said
    assert "2001" not in said
    assert "host-" in said


def test_two_spellings_of_an_address_are_one_host() -> None:
    names = Pseudonyms(KEY, [])
    assert names.party("2001:db8::10") == names.party("2001:0DB8:0:0:0:0:0:10")


def test_another_key_gives_other_pseudonyms() -> None:
    assert Pseudonyms(KEY, []).party("+441632960142") != Pseudonyms(KEY[::-1], []).party("+441632960142")


def test_captures_are_numbered_in_the_order_in_which_they_were_given() -> None:
    names = Pseudonyms(KEY, ["b.pcap", "a.pcap", "b.pcap"])
    names.party("1234567")
    assert [names.file(name) for name in ("a.pcap", "b.pcap", "c.pcap")] == ["capture-2", "capture-1", "capture-3"]


def test_kinds_and_columns_stay_as_promised() -> None:
    plain = build_tables(made.assessment())
    for name, frame in Pseudonyms(KEY, []).tables(plain).items():
        assert list(frame.dtypes) == list(plain[name].dtypes)
        assert list(frame.columns) == list(plain[name].columns)
    assert plain["streams"].source[0] == "192.0.2.10", "what was handed in is not written to"
