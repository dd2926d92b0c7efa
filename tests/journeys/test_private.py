"""A private report names nobody: every file of it, its name, and all that is said beside it, searched for all names."""

import io
import json
import re
from collections.abc import Iterator
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path
from typing import NamedTuple

import pandas as pd
import pytest

import rtpaudit
from rtpaudit.cli import main
from tests.crafted_calls import Made, capture
from tests.journeys.conftest import CAPTURES

REAL = [
    "sip-tcp.a.pcap", "proxy-two-legs.mon.pcap", "dtmf-rfc4733.b-any-sll.pcap", "xr-loss3.a.pcap",
    "pcmu-sip-udp-one-way.pcap",
]  # fmt: skip
# Words of SIP and of ours that may stand in a URI or a name and tell nobody.
WORDS = {"sip", "sips", "tel", "anonymous", "invalid", "unknown", "test", "audio", "sipp", "service", "user", "none"}


class Run(NamedTuple):
    """What a command line gave."""

    status: int
    out: str
    err: str


def triage(*arguments: object) -> Run:
    """Triage in this process, since many are run."""
    with redirect_stdout(io.StringIO()) as out, redirect_stderr(io.StringIO()) as err:
        status = main(["triage", *map(str, arguments)])
    return Run(status, out.getvalue(), err.getvalue())


def texts_of(folder: Path) -> Iterator[tuple[str, str]]:
    """Name and content of every file, tables of Parquet as text, and the names themselves."""
    for path in sorted(folder.rglob("*")):
        yield str(path.relative_to(folder)), str(path.relative_to(folder))
        if path.suffix == ".parquet":
            frame = pd.read_parquet(path)
            yield path.name, frame.to_csv() + str(frame.attrs)
        elif path.is_file():
            yield path.name, path.read_bytes().decode("utf-8", "replace")


def secrets_of(audit: rtpaudit.Audit) -> set[str]:
    """What the signalling and the headers of a capture tell of who spoke."""
    found: set[str] = set()
    for call in audit.assessment.calls:
        said = call.signalled
        found |= {call.caller, call.callee, call.call_id}
        if said is not None:
            found |= {term.address for term in said.media} | set(said.diversions) | set(said.session_ids)
            for party in (said.caller, said.callee):
                found |= {party.user, party.display_name, party.uri, party.asserted_identity, party.user_agent}
                found |= {party.address.rpartition(":")[0], *re.split(r"[@;]|:(?!\d+$)", party.uri)[1:]}
    for stream in audit.assessment.streams:
        found |= {stream.stream.source, stream.stream.destination}
    for message in audit.assessment.messages:
        found |= {message.call_id, message.from_.rpartition(":")[0], message.to.rpartition(":")[0]}
    found |= {name.partition(".")[0] for name in audit.assessment.captures}
    return {one for one in found if len(one) > 2 and one.casefold() not in WORDS}


def leaks(texts: Iterator[tuple[str, str]], secrets: set[str]) -> set[tuple[str, str]]:
    whole = re.compile("|".join(rf"(?<![\w.]){re.escape(one)}(?!\w)" for one in sorted(secrets)), re.IGNORECASE)
    return {(name, found[0]) for name, text in texts for found in whole.finditer(text)}


def private(place: Path, path: Path) -> Iterator[tuple[str, str]]:
    """All that a private audit of a capture leaves behind."""
    out = place / "hidden"
    for options in ((), ("--json",)):
        result = triage(path, "--private", "--out", out, *options)
        assert result.status == 0, result.err
        yield "standard output", result.out
        yield "standard error", result.err
    yield from texts_of(out)


@pytest.mark.parametrize("name", REAL)
def test_nobody_of_a_real_capture_is_named(place: Path, name: str) -> None:
    secrets = secrets_of(rtpaudit.audit(CAPTURES / name))
    assert len(secrets) > 2
    texts = list(private(place, CAPTURES / name))
    assert len(texts) > 20
    assert leaks(iter(texts), secrets) == set()


TELLING = (
    "P-Asserted-Identity: \"Ann O. Hm\" <sip:ann.asserted@home.example.com>\r\n"
    "Diversion: <sip:harbour.master@office.example.com>;reason=unconditional\r\n"
    "User-Agent: AnnsOwnPhone/7\r\n"
    "Contact: <sip:ann.contact@192.0.2.77:5070>\r\n"
    "Subject: about Captain Brine\r\n"
    "Session-ID: ab30317f1a784dc48ff824d0d3715d86;remote=47755a9de7794ba387653f2099600ef2\r\n"
    "Referred-By: <sip:quay.clerk@pier.example.com>\r\n"
    "Reason: Q.850;cause=16;text=\"Ann hung up\"\r\n"
)  # fmt: skip
NAMED = {
    "Ann", "Öhm", "Ferry desk", "ferry.desk", "+441632960142", "441632960142", "192.0.2.10", "198.51.100.20",
    "192.0.2.77", "ann.asserted", "home.example.com", "harbour.master", "office.example.com", "AnnsOwnPhone",
    "ann.contact", "Captain Brine", "ab30317f1a784dc48ff824d0d3715d86", "quay.clerk", "pier.example.com",
    "dialog-1-of-ann@192.0.2.10", "dialog-1-of-ann", "brine-complaint", "BrineCodec", "Brine", "BRINE", "4739",
    "sip:desk@198.51.100.20",
}  # fmt: skip


@pytest.fixture(scope="module")
def crafted(place: Path) -> Path:
    """A call whose every field names somebody, and messages that cannot be read or mean nothing."""
    made = Made(1, extra=TELLING, digits="4739")
    datagrams = made.all()
    first = datagrams[0]
    offer = first.payload.replace(b"RTP/AVP 0 101", b"RTP/AVP 0 101 97").replace(
        b"a=rtpmap:101", b"a=rtpmap:97 BrineCodec/8000\r\na=rtpmap:101"
    )
    offer = re.sub(rb"Content-Length: \d+", b"Content-Length: %d" % (len(offer.partition(b"\r\n\r\n")[2])), offer)
    datagrams[0] = first._replace(payload=offer)
    # Half of what the callee says is in an encoding that somebody named after himself.
    datagrams = [
        one._replace(payload=bytes([0x80, 97]) + one.payload[2:])
        if one.source == (made.callee_host, made.ports[1]) and one.payload[:2] == b"\x80\x00"
        else one
        for one in datagrams
    ]
    strange = [
        b"SIP/2.0 480 Captain Brine is at sea\r\nVia: SIP/2.0/UDP 192.0.2.10;branch=z9hG4bKx\r\n"
        b"From: Ann <sip:ann.contact@home.example.com>;tag=1\r\nTo: Brine <sip:harbour.master@office.example.com>;tag=2"
        b"\r\nCall-ID: dialog-1-of-ann\r\nCSeq: 3 BRINE\r\nContent-Length: 0\r\n\r\n",
        b"INVITE sip:desk@198.51.100.20 SIP/2.0\r\nFrom: Captain Brine <sip:ann.contact\r\nCSeq: Brine\r\n"
        b"Call-ID: dialog-1-of-ann\r\nContent-Length: 99999\r\n\r\nBrine",
        b"BRINE sip:desk@198.51.100.20 SIP/2.0\r\nTo: Brine\r\nCall-ID: dialog-1-of-ann\r\nBrine\r\n\r\n",
        b"INVITE sip:desk@198.51.100.20 SIP/2.0\r\nVia: SIP/2.0/UDP Brine\r\nFrom: <sip:ann.contact@Brine>;tag=9\r\n"
        b"To: <sip:harbour.master@Brine>\r\nCall-ID: dialog-1-of-ann\r\nCSeq: 1 INVITE\r\nContent-Type: application/sdp"
        b"\r\nContent-Length: 40\r\n\r\nv=0\r\no=Brine 1 1 IN IP4 Brine\r\nm=Brine Brine Brine\r\n",
    ]
    datagrams += [first._replace(time_ns=first.time_ns + 10 * k, payload=text) for k, text in enumerate(strange, 1)]
    path = place / "brine-complaint.pcap"
    path.write_bytes(capture(datagrams))
    return path


def test_nobody_of_a_capture_that_names_somebody_everywhere_is_named(place: Path, crafted: Path) -> None:
    plain = triage(crafted, "--out", place / "plain", "--digits")
    assert plain.status == 0, plain.err
    shown = {found for _, found in leaks(texts_of(place / "plain"), NAMED)}
    assert len(shown) > 10, "the search finds what a plain report shows"
    assert leaks(private(place, crafted), NAMED) == set()


def test_a_selection_that_fits_nothing_names_nobody_either(place: Path, crafted: Path) -> None:
    for words in (("--party", "nobody"), ("--call", "c99"), ("--at", "2001-01-01"), ("--near", "203.0.113.99")):
        result = triage(crafted, "--private", "--out", place / "none", *words)
        assert result.status == 2
        assert leaks(iter([("error", result.err)]), NAMED) == set()


def test_private_figures_are_those_of_the_plain_report(place: Path, crafted: Path) -> None:
    for name, more in (("open", ()), ("closed", ("--private",))):
        assert triage(crafted, "--quiet", "--out", place / name, *more).status == 0
    plain, closed = (json.loads((place / name / "audit.json").read_bytes()) for name in ("open", "closed"))
    for table in ("calls", "streams"):
        numbers = [
            [{key: value for key, value in row.items() if not isinstance(value, str)} for row in document[table]]
            for document in (plain, closed)
        ]
        assert numbers[0] == numbers[1]
    assert [row["digit"] for row in closed["events"]] == [None] * len(plain["events"])
    assert len(plain["events"]) == 4


def test_pseudonyms_change_from_run_to_run(place: Path, crafted: Path) -> None:
    callers = set()
    for name in ("first", "second"):
        triage(crafted, "--private", "--quiet", "--out", place / name)
        callers |= set(pd.read_csv(io.BytesIO((place / name / "calls.csv").read_bytes())).caller)
    assert len(callers) == 2 * len(set(pd.read_csv(place / "open" / "calls.csv").caller))
