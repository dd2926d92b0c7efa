from rtpaudit.signalling.conversations import conversations
from tests.signalling.talk import Flow, calls, described

OFFER, ANSWER = described("192.0.2.101", 49172), described("192.0.2.201", 3456)


def leg(path: str, begin: float, call_id: str, *, answer: float = 2000, end: float = 9000, **named: str) -> Flow:
    """One leg that is answered and ended; times in ms after ``begin``."""
    there, back = path, ">".join(reversed(path.split(">")))
    session = named.pop("session", "")
    flow = Flow(call_id=call_id, **named)
    extra = f"Session-ID: {session}" if session else ""
    flow.request(begin, there, "INVITE", 1, "i" + call_id, tag="", sdp=OFFER, extra=extra)
    flow.response(begin + 100, back, "180 Ringing", "INVITE", 1, "i" + call_id)
    flow.response(begin + answer, back, "200 OK", "INVITE", 1, "i" + call_id, sdp=ANSWER)
    flow.request(begin + end, there, "BYE", 2, "b" + call_id)
    return flow


def test_two_legs_through_a_relay_are_one_conversation_by_parties_and_times() -> None:
    assert conversations(calls(leg("alice>proxy1", 0, "a"), leg("proxy1>bob", 5, "b", answer=1990))) == [0, 0]


def test_three_legs_in_a_row_are_one_conversation() -> None:
    flows = [leg("alice>proxy1", 0, "a"), leg("proxy1>proxy2", 5, "b"), leg("proxy2>bob", 9, "c")]
    assert conversations(calls(*flows)) == [0, 0, 0]


def test_a_gateway_that_puts_a_prefix_before_the_number_is_seen_through() -> None:
    first = leg("alice>proxy1", 0, "a", callee="<sip:01632960123@example.com>")
    second = leg("proxy1>bob", 5, "b", callee="<sip:+441632960123@example.com>")
    assert conversations(calls(first, second)) == [0, 0]


def test_two_calls_of_the_same_parties_between_the_same_hosts_are_two() -> None:
    assert conversations(calls(leg("alice>bob", 0, "a"), leg("alice>bob", 5, "b"))) == [0, 1]


def test_a_call_repeated_later_is_another_conversation() -> None:
    flows = [leg("alice>proxy1", 0, "a"), leg("proxy1>bob", 20_000, "b")]
    assert conversations(calls(*flows)) == [0, 1]


def test_other_parties_or_another_end_tell_legs_apart() -> None:
    other_callee = leg("proxy1>bob", 5, "b", callee="<sip:carol@example.com>")
    assert conversations(calls(leg("alice>proxy1", 0, "a"), other_callee)) == [0, 1]
    assert conversations(calls(leg("alice>proxy1", 0, "a"), leg("proxy1>bob", 5, "b", end=6000))) == [0, 1]


def test_a_session_id_in_common_joins_legs_whatever_their_parties() -> None:
    session = "ab30317f1a784dc48ff824d0d3715d86"
    first = leg("alice>proxy1", 0, "a", session=f"{session};remote=00000000000000000000000000000000")
    second = leg("proxy2>carol", 7, "b", caller="<sip:9@x>", callee="<sip:8@x>", session=session)
    assert conversations(calls(first, second)) == [0, 0]


def test_the_nil_session_id_joins_nothing() -> None:
    nil = "00000000000000000000000000000000"
    first = leg("alice>proxy1", 0, "a", caller="<sip:1@x>", session=nil)
    assert conversations(calls(first, leg("proxy2>carol", 7, "b", caller="<sip:2@x>", session=nil))) == [0, 1]


def test_conversations_are_numbered_by_their_first_leg() -> None:
    flows = [
        leg("alice>proxy1", 0, "a"),
        leg("carol>proxy2", 2, "x", caller="<sip:carol@x>"),
        leg("proxy1>bob", 5, "b"),
    ]
    assert conversations(calls(*flows)) == [0, 1, 0]


def test_many_calls_of_one_party_take_no_time() -> None:
    flows = [leg("alice>proxy1", 20_000 * row, f"a{row}") for row in range(400)]
    assert conversations(calls(*flows)) == list(range(400))
