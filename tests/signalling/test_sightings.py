from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.sightings import Reader, Sighting
from rtpaudit.signalling.sip import parse_message
from tests.signalling import torture
from tests.signalling.torture import OFFER, request, wire


def seen(octets: bytes, reader: Reader | None = None) -> tuple[SignallingMessage, Sighting | None, list[str]]:
    reader, faults = reader or Reader(), []
    message = parse_message(octets)
    row = reader.row(message, SignallingMessage(0, "192.0.2.101:5060", "192.0.2.201:5060", "SIP", "UDP", "", ""))
    return row, reader.sighting(message, row, faults), faults


def test_a_request_gives_its_row_and_what_a_dialog_needs() -> None:
    row, sighting, faults = seen(torture.UNREASON)
    assert (row.message[:5], row.cseq, row.status_code) == ("200 =", "35 INVITE", 200)
    assert sighting is not None
    assert (sighting.method, sighting.request, sighting.number, sighting.status) == ("INVITE", False, 35, 200)
    assert (sighting.branch, sighting.from_tag, sighting.to_tag) == ("z9hG4bK1324923", "11141343", "2229")
    assert faults == []


def test_methods_that_make_no_call_give_a_row_only() -> None:
    row, sighting, _ = seen(torture.ESCNULL)
    assert (row.message, row.target) == ("REGISTER", "sip:example.com")
    assert sighting is None


def test_a_description_in_a_multipart_body_is_found() -> None:
    body = (
        b"--x\r\nContent-Type: text/plain\r\n\r\nhi\r\n--x\r\nContent-Type: application/sdp\r\n\r\n"
        + OFFER
        + b"\r\n--x--"
    )
    octets = request("m", length="", body=body).replace(b"application/sdp", b"multipart/mixed;boundary=x", 1)
    _, sighting, _ = seen(octets)
    assert sighting is not None
    assert sighting.description is not None
    assert sighting.description.media[0].port == 49217


def test_a_status_within_a_fragment_is_kept() -> None:
    head = "NOTIFY sip:a@example.com SIP/2.0\nCall-ID: a\nCSeq: 1 NOTIFY\nContent-Type: message/sipfrag;version=2.0"
    _, sighting, _ = seen(wire(head, b"SIP/2.0 603 Declined\r\n"))
    assert sighting is not None
    assert sighting.fragment_status == 603


def test_the_same_message_again_between_the_same_places_is_a_repetition() -> None:
    reader = Reader()
    rows = [seen(octets, reader)[0] for octets in (torture.NOREASON, torture.NOREASON, torture.UNREASON)]
    assert [row.repeated for row in rows] == [False, True, False]


def test_the_note_says_why_a_call_ended() -> None:
    octets = request("n", extra='Reason: Q.850;cause=16;text="Normal"\nWarning: 399 host "x\u202ey"\n')
    assert seen(octets)[0].note == 'Reason Q.850;cause=16;text="Normal"; Warning 399 host "x\\u202ey"'


def test_equal_descriptions_are_kept_once() -> None:
    reader = Reader()
    first, second = seen(request("a"), reader)[1], seen(request("b"), reader)[1]
    assert first is not None
    assert second is not None
    assert first.description is second.description
