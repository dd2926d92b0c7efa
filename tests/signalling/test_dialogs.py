"""The flows of RFC 3665, and what captures make of calls; times are ours, messages those of the figures."""

import math
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.signalling.dialogs import calls_of
from tests.signalling.talk import MS, Flow, call, calls, described, sightings

OFFER = described("192.0.2.101", 49172)
ANSWER = described("192.0.2.201", 3456)


def answered_directly() -> Flow:
    """RFC 3665, 3.1."""
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(200, "bob>alice", "180 Ringing", "INVITE", 1, "74bf9")
    flow.response(3000, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER)
    flow.request(3010, "alice>bob", "ACK", 1, "74bd5")
    flow.request(9000, "bob>alice", "BYE", 1, "nashds7", by="callee")
    flow.response(9010, "alice>bob", "200 OK", "BYE", 1, "nashds7", by="callee")
    return flow


def through_two_proxies(flow: Flow, number: int, begin: float, first: str = "74bf9") -> None:
    """INVITE, 180 and 200 of RFC 3665, 3.2 (F4 to F16)."""
    second, third = f"2d4790.1 {first}", f"721e4.1 2d4790.1 {first}"
    flow.invite(begin, "alice>proxy1", number=number, via=first, sdp=OFFER)
    flow.invite(begin + 1, "proxy1>proxy2", number=number, via=second, sdp=OFFER)
    flow.response(begin + 2, "proxy1>alice", "100 Trying", "INVITE", number, first, tag="")
    flow.invite(begin + 3, "proxy2>bob", number=number, via=third, sdp=OFFER)
    flow.response(begin + 4, "proxy2>proxy1", "100 Trying", "INVITE", number, second, tag="")
    for at, status, sdp in ((100, "180 Ringing", ""), (2000, "200 OK", ANSWER)):
        flow.response(begin + at, "bob>proxy2", status, "INVITE", number, third, sdp=sdp)
        flow.response(begin + at + 1, "proxy2>proxy1", status, "INVITE", number, second, sdp=sdp)
        flow.response(begin + at + 2, "proxy1>alice", status, "INVITE", number, first, sdp=sdp)
    flow.request(begin + 2005, "alice>proxy1", "ACK", number, "74b76")
    flow.request(begin + 2006, "proxy1>proxy2", "ACK", number, "2d4790.2 74b76")
    flow.request(begin + 2007, "proxy2>bob", "ACK", number, "721e4.2 2d4790.2 74b76")


def test_rfc_3665_3_1_successful_session_establishment() -> None:
    one = call(answered_directly())
    assert (one.outcome, one.status_code, one.release_by) == ("answered", 200, "callee")
    assert (one.started_ns, one.answered_ns, one.released_ns, one.ended_ns) == (0, 3000 * MS, 9000 * MS, 9000 * MS)
    assert one.setup_delay_s == pytest.approx(0.2)
    assert (one.caller.user, one.caller.display_name, one.caller.uri) == (
        "alice",
        "Alice",
        "sip:alice@atlanta.example.com",
    )
    assert (one.callee.user, one.callee.display_name) == ("bob", "Bob")
    assert (one.caller.address, one.callee.address) == ("192.0.2.101:5060", "192.0.2.201:5060")
    assert [row.message for row in one.messages] == ["INVITE", "180 Ringing", "200 OK", "ACK", "BYE", "200 OK"]
    assert not one.began_before


def test_rfc_3665_3_2_two_proxies_with_a_challenge_make_one_call() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", via="74b43", sdp=OFFER)
    flow.response(1, "proxy1>alice", "407 Proxy Authorization Required", "INVITE", 1, "74b43", tag="3flal12sf")
    flow.request(2, "alice>proxy1", "ACK", 1, "74b43", tag="3flal12sf")
    through_two_proxies(flow, 2, 10)
    flow.request(8000, "bob>proxy2", "BYE", 1, "nashds7", by="callee")
    flow.request(8001, "proxy2>proxy1", "BYE", 1, "721e4.3 nashds7", by="callee")
    flow.request(8002, "proxy1>alice", "BYE", 1, "2d4790.3 721e4.3 nashds7", by="callee")
    one = call(flow)
    assert (one.outcome, one.status_code, one.release_by, one.forks) == ("answered", 200, "callee", 1)
    assert one.setup_delay_s == pytest.approx(0.112)
    assert (one.answered_ns, one.released_ns) == (2012 * MS, 8000 * MS)
    assert len(one.media) == 2
    assert len(one.messages) == len(flow.octets)


def test_rfc_3665_3_3_challenges_of_two_proxies_are_passed_over() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", via="74b03", sdp=OFFER)
    flow.response(1, "proxy1>alice", "407 Proxy Authorization Required", "INVITE", 1, "74b03", tag="876321")
    flow.request(2, "alice>proxy1", "ACK", 1, "74b03", tag="876321")
    flow.invite(10, "alice>proxy1", number=2, via="74b21", sdp=OFFER)
    flow.invite(11, "proxy1>proxy2", number=2, via="230f2.1 74b21", sdp=OFFER)
    flow.response(12, "proxy2>proxy1", "407 Proxy Authorization Required", "INVITE", 2, "230f2.1 74b21", tag="838209")
    flow.request(13, "proxy1>proxy2", "ACK", 2, "230f2.1", tag="838209")
    flow.response(14, "proxy1>alice", "407 Proxy Authorization Required", "INVITE", 2, "74b21", tag="838209")
    through_two_proxies(flow, 3, 20, first="74bf9")
    one = call(flow)
    assert (one.outcome, one.status_code, one.release_by) == ("answered", 200, "")
    assert one.setup_delay_s == pytest.approx(0.122)
    assert one.released_ns is None
    assert one.ended_ns == 2027 * MS


def test_rfc_3665_3_4_an_unanswered_attempt_beside_another_call_id_gets_no_reply() -> None:
    dead = Flow(call_id="4Fde34wkd11wsGFDs3@atlanta.example.com")
    for row, at in enumerate([0, 500, 1500, 3500, 7500, 15500, 31500]):
        dead.invite(at, "alice>proxy1", via="465b6d", sdp=OFFER)
        assert len(dead.octets) == row + 1
    second = Flow()
    through_two_proxies(second, 1, 32_000)
    first, other = calls(dead, second)
    assert (first.outcome, first.status_code, first.release_by) == ("no reply", None, "")
    assert math.isnan(first.setup_delay_s)
    assert (first.started_ns, first.ended_ns, len(first.media)) == (0, 31500 * MS, 1)
    assert other.outcome == "answered"


def test_rfc_3665_3_5_an_alg_that_bridges_the_media_makes_two_legs() -> None:
    flow = Flow()
    alg_offer, alg_answer = described("192.0.2.128", 2000), described("192.0.2.128", 1734)
    flow.invite(0, "alice>alg", sdp=OFFER)
    flow.invite(1, "alg>proxy2", via="739578.1 74bf9", sdp=alg_offer)
    flow.response(2, "alg>alice", "100 Trying", "INVITE", 1, "74bf9", tag="")
    flow.invite(3, "proxy2>bob", via="721e4.1 739578.1 74bf9", sdp=alg_offer)
    for at, status, sdp, rewritten in ((100, "180 Ringing", "", ""), (2000, "200 OK", ANSWER, alg_answer)):
        flow.response(at, "bob>proxy2", status, "INVITE", 1, "721e4.1 739578.1 74bf9", sdp=sdp)
        flow.response(at + 1, "proxy2>alg", status, "INVITE", 1, "739578.1 74bf9", sdp=sdp)
        flow.response(at + 2, "alg>alice", status, "INVITE", 1, "74bf9", sdp=rewritten)
    flow.request(2010, "alice>alg", "ACK", 1, "74bda")
    flow.request(2011, "alg>bob", "ACK", 1, "739578.2 74bda")
    flow.request(9000, "alice>alg", "BYE", 2, "74bTf")
    flow.request(9001, "alg>bob", "BYE", 2, "739578.3 74bTf")
    outer, inner = calls(flow)
    assert [(term.side, term.address, term.port) for term in outer.media] == [
        ("caller", "192.0.2.101", 49172),
        ("callee", "192.0.2.128", 1734),
    ]
    assert [(term.side, term.address, term.port) for term in inner.media] == [
        ("caller", "192.0.2.128", 2000),
        ("callee", "192.0.2.201", 3456),
    ]
    # Each as the nearest hop to its own caller saw it: Alice at F11, the ALG at F10.
    assert (outer.answered_ns, inner.answered_ns) == (2002 * MS, 2001 * MS)
    assert (outer.released_ns, inner.released_ns) == (9000 * MS, 9001 * MS)
    assert outer.outcome == inner.outcome == "answered"


def test_rfc_3665_3_6_a_redirect_is_passed_over_and_the_answer_comes_in_the_ack() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", via="bf9f44")
    flow.response(40, "proxy1>alice", "302 Moved Temporarily", "INVITE", 1, "bf9f44", tag="53fHlqlQ2")
    flow.request(41, "alice>proxy1", "ACK", 1, "bf9f44", tag="53fHlqlQ2")
    flow.invite(50, "alice>proxy2", number=2)
    flow.invite(51, "proxy2>carol", number=2, via="721e.1 74bf9")
    flow.response(150, "carol>proxy2", "180 Ringing", "INVITE", 2, "721e.1 74bf9")
    flow.response(151, "proxy2>alice", "180 Ringing", "INVITE", 2, "74bf9")
    flow.response(900, "carol>proxy2", "200 OK", "INVITE", 2, "721e.1 74bf9", sdp=described("192.0.2.100", 3456))
    flow.response(901, "proxy2>alice", "200 OK", "INVITE", 2, "74bf9", sdp=described("192.0.2.100", 3456))
    flow.request(905, "alice>proxy2", "ACK", 2, "74bq9", sdp=OFFER)
    flow.request(906, "proxy2>carol", "ACK", 2, "721e.2 74bq9", sdp=OFFER)
    one = call(flow)
    assert (one.outcome, one.status_code) == ("answered", 200)
    assert one.setup_delay_s == pytest.approx(0.151)
    assert [(term.side, term.port, term.from_ns) for term in one.media] == [
        ("callee", 3456, 901 * MS),
        ("caller", 49172, 905 * MS),
    ]


def test_rfc_3665_3_7_a_re_invite_moves_the_media_of_the_callee() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy2", sdp=OFFER)
    flow.invite(1, "proxy2>bob", via="2d4790.1 74bf9", sdp=OFFER)
    flow.response(100, "bob>proxy2", "200 OK", "INVITE", 1, "2d4790.1 74bf9", sdp=ANSWER)
    flow.response(101, "proxy2>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER)
    flow.request(102, "alice>bob", "ACK", 1, "74b7b")
    flow.request(5000, "carol>alice", "INVITE", 14, "lkld5l", by="callee", sdp=described("192.0.2.100", 47172))
    flow.response(
        5010, "alice>carol", "200 OK", "INVITE", 14, "lkld5l", by="callee", sdp=described("192.0.2.101", 1000)
    )
    flow.request(5020, "carol>alice", "ACK", 14, "lkldcc", by="callee")
    flow.request(9000, "alice>carol", "BYE", 2, "74bo4")
    one = call(flow)
    assert [(term.side, term.address, term.port, term.from_ns, term.until_ns) for term in one.media] == [
        ("caller", "192.0.2.101", 49172, 0, 5010 * MS),
        ("callee", "192.0.2.201", 3456, 101 * MS, 5000 * MS),
        ("callee", "192.0.2.100", 47172, 5000 * MS, None),
        ("caller", "192.0.2.101", 1000, 5010 * MS, None),
    ]
    assert (one.release_by, one.callee.user) == ("caller", "bob")


def test_rfc_3665_3_8_no_answer_is_cancelled_by_the_caller() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.response(1, "proxy1>alice", "100 Trying", "INVITE", 1, "74bf9", tag="")
    flow.response(90, "proxy1>alice", "180 Ringing", "INVITE", 1, "74bf9")
    flow.request(9000, "alice>proxy1", "CANCEL", 1, "74bf9", tag="", extra='Reason: SIP;cause=480;text="no answer"')
    flow.response(9001, "proxy1>alice", "200 OK", "CANCEL", 1, "74bf9")
    flow.response(9010, "proxy1>alice", "487 Request Terminated", "INVITE", 1, "74bf9")
    flow.request(9011, "alice>proxy1", "ACK", 1, "74bf9")
    one = call(flow)
    assert (one.outcome, one.status_code, one.release_by) == ("cancelled", 487, "caller")
    assert (one.answered_ns, one.released_ns, one.ended_ns) == (None, 9000 * MS, 9011 * MS)
    assert one.setup_delay_s == pytest.approx(0.09)
    assert one.reason == "no answer"


def test_rfc_3665_3_9_busy_is_a_refusal() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.invite(1, "proxy1>bob", via="2d4790.1 74bf9", sdp=OFFER)
    flow.response(70, "bob>proxy1", "486 Busy Here", "INVITE", 1, "2d4790.1 74bf9")
    flow.request(71, "proxy1>bob", "ACK", 1, "2d4790.1")
    flow.response(72, "proxy1>alice", "486 Busy Here", "INVITE", 1, "74bf9")
    flow.request(73, "alice>proxy1", "ACK", 1, "74bf9")
    one = call(flow)
    assert (one.outcome, one.status_code, one.release_by, one.reason) == ("refused", 486, "", "Busy Here")
    assert one.setup_delay_s == pytest.approx(0.072)
    assert one.ended_ns == 73 * MS


@pytest.mark.parametrize(
    ("status", "outcome"), [("480 No Response", "failed"), ("503 Down", "failed"), ("603 No", "refused")]
)
def test_rfc_3665_3_10_and_3_11_other_final_responses_fail_the_call(status: str, outcome: str) -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    for row, at in enumerate([1, 501, 1501, 3501, 7501, 15501, 31501]):
        flow.invite(at, "proxy1>bob", via="721e4.1 74bf9", sdp=OFFER)
        assert len(flow.octets) == row + 2
    flow.response(32_000, "proxy1>alice", status, "INVITE", 1, "74bf9")
    one = call(flow)
    assert (one.outcome, one.status_code) == (outcome, int(status[:3]))
    assert one.setup_delay_s == pytest.approx(32.0)


def test_a_busy_branch_behind_a_forking_proxy_is_not_what_the_caller_got() -> None:
    """RFC 5359, 2.8: B1 is busy, the proxy goes on to B2."""
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.invite(1, "proxy1>bob", via="83749.1 74bf9", sdp=OFFER)
    flow.response(60, "bob>proxy1", "486 Busy Here", "INVITE", 1, "83749.1 74bf9", tag="13756")
    flow.request(61, "proxy1>bob", "ACK", 1, "83749.1", tag="13756")
    flow.response(62, "proxy1>alice", "181 Call is Being Forwarded", "INVITE", 1, "74bf9", tag="9214d")
    flow.invite(63, "proxy1>carol", via="83749.2 74bf9", sdp=OFFER)
    flow.response(90, "carol>proxy1", "180 Ringing", "INVITE", 1, "83749.2 74bf9")
    flow.response(91, "proxy1>alice", "180 Ringing", "INVITE", 1, "74bf9")
    flow.response(95, "carol>proxy1", "200 OK", "INVITE", 1, "83749.2 74bf9", sdp=described("192.0.2.100", 3456))
    flow.response(96, "proxy1>alice", "200 OK", "INVITE", 1, "74bf9", sdp=described("192.0.2.100", 3456))
    one = call(flow)
    assert (one.outcome, one.status_code) == ("answered", 200)
    assert one.setup_delay_s == pytest.approx(0.062)
    assert {term.address for term in one.media if term.side == "callee"} == {"192.0.2.100"}


def test_the_final_of_a_further_hop_counts_where_the_first_hop_shows_none() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.invite(1, "proxy1>bob", via="83749.1 74bf9", sdp=OFFER)
    flow.response(60, "bob>proxy1", "486 Busy Here", "INVITE", 1, "83749.1 74bf9")
    assert call(flow).outcome == "refused"


def test_retransmissions_change_nothing() -> None:
    once, often = answered_directly(), answered_directly()
    often.octets = [copy for one in once.octets for copy in (one, (one[0] + 500 * MS, *one[1:]))]
    first, second = call(once), call(often)
    assert (first.setup_delay_s, first.answered_ns, first.released_ns) == (
        second.setup_delay_s,
        second.answered_ns,
        second.released_ns,
    )
    assert [term.from_ns for term in first.media] == [term.from_ns for term in second.media]


def test_a_challenge_that_nobody_took_up_fails_the_call() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(10, "bob>alice", "401 Unauthorized", "INVITE", 1, "74bf9")
    one = call(flow)
    assert (one.outcome, one.status_code) == ("failed", 401)
    assert math.isnan(one.setup_delay_s)


def test_a_challenge_followed_by_silence_is_no_reply() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(10, "bob>alice", "401 Unauthorized", "INVITE", 1, "74bf9")
    flow.invite(20, number=2, via="74bf0", sdp=OFFER)
    one = call(flow)
    assert (one.outcome, one.status_code) == ("no reply", None)


def test_a_session_that_never_ends_in_the_capture_has_no_release() -> None:
    flow = answered_directly()
    del flow.octets[-2:]
    one = call(flow)
    assert (one.outcome, one.released_ns, one.release_by, one.ended_ns) == ("answered", None, "", 3010 * MS)


def test_a_session_that_began_before_the_capture_is_told_by_its_bye() -> None:
    flow = answered_directly()
    del flow.octets[:-2]
    one = call(flow)
    assert one.began_before
    assert (one.outcome, one.status_code, one.answered_ns) == ("answered", None, None)
    assert (one.started_ns, one.released_ns) == (9000 * MS, 9000 * MS)
    assert (one.caller.user, one.release_by) == ("bob", "caller")
    assert math.isnan(one.setup_delay_s)


def test_a_capture_that_begins_while_it_rings_still_sees_the_answer() -> None:
    flow = answered_directly()
    del flow.octets[0]
    one = call(flow)
    assert one.began_before
    assert (one.outcome, one.status_code, one.answered_ns, one.release_by) == ("answered", 200, 3000 * MS, "callee")
    assert one.caller.user == "alice"


def test_a_capture_of_one_direction_proves_the_answer_by_the_ack() -> None:
    flow = answered_directly()
    flow.octets = [one for one in flow.octets if one[1] == "192.0.2.101:5060"]
    one = call(flow)
    assert (one.outcome, one.status_code, one.answered_ns) == ("answered", None, 3010 * MS)


def test_the_ack_of_a_refusal_proves_no_answer() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.request(90, "alice>bob", "ACK", 1, "74bf9")
    assert call(flow).outcome == "no reply"


def test_messages_out_of_time_order_are_put_in_order() -> None:
    flow = answered_directly()
    flow.octets.reverse()
    one = call(flow)
    assert (one.answered_ns, one.setup_delay_s) == (3000 * MS, pytest.approx(0.2))
    assert all(a.time_ns <= b.time_ns for a, b in pairwise(one.messages))


def test_register_and_options_are_no_calls() -> None:
    flow = Flow()
    flow.request(0, "alice>proxy1", "REGISTER", 1, "a", tag="")
    flow.request(1, "alice>proxy1", "OPTIONS", 2, "b", tag="", sdp=OFFER)
    flow.request(2, "alice>proxy1", "NOTIFY", 3, "c", tag="")
    assert calls(flow) == []


def test_reason_of_a_bye_with_its_q_850_cause_as_rfc_3326_2_has_it() -> None:
    flow = answered_directly()
    flow.octets[-2] = (
        *flow.octets[-2][:3],
        flow.octets[-2][3].replace(
            b"Content-Length",
            b'Reason: SIP ;cause=200 ;text="Call completed elsewhere", Q.850;cause=16\r\nContent-Length',
        ),
    )
    one = call(flow)
    assert (one.reason, one.q850_cause) == ("Call completed elsewhere", 16)


def test_parties_carry_identity_software_and_diversion() -> None:
    flow = Flow()
    extra = (
        "P-Asserted-Identity: <sip:+12015550123@atlanta.example.com>\nUser-Agent: softphone/1\nSession-ID: "
        "ab30317f1a784dc48ff824d0d3715d86;remote=00000000000000000000000000000000\n"
        "Diversion: <sip:desk@biloxi.example.com>;reason=no-answer, <sip:front@biloxi.example.com>;reason=busy"
    )
    flow.request(0, "alice>bob", "INVITE", 1, "74bf9", tag="", sdp=OFFER, extra=extra)
    flow.response(5, "bob>alice", "100 Trying", "INVITE", 1, "74bf9", tag="", extra="Server: proxy/9")
    session = "Session-ID: 47755a9de7794ba387653f2099600ef2;remote=ab30317f1a784dc48ff824d0d3715d86"
    flow.response(9, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER, extra=f"Server: gateway/2\n{session}")
    one = call(flow)
    assert one.caller.asserted_identity == "sip:+12015550123@atlanta.example.com"
    assert (one.caller.user_agent, one.callee.user_agent) == ("softphone/1", "gateway/2")
    assert one.diversions == ["sip:desk@biloxi.example.com", "sip:front@biloxi.example.com"]
    assert one.session_ids == {"ab30317f1a784dc48ff824d0d3715d86", "47755a9de7794ba387653f2099600ef2"}


def test_history_info_tells_diversions_where_no_diversion_does() -> None:
    flow = Flow()
    history = "History-Info: <sip:front@example.com>;index=1\n"
    history += "History-Info: <sip:desk@example.com>;index=1.1, <sip:bob@example.com>;index=1.1.1"
    flow.request(0, "alice>bob", "INVITE", 1, "74bf9", tag="", extra=history)
    assert call(flow).diversions == ["sip:desk@example.com", "sip:front@example.com"]


def test_rfc_4475_3_4_1_an_invite_without_tag_and_branch_makes_a_call() -> None:
    flow = Flow(caller_tag="")
    flow.octets = [(at, source, destination, octets) for at, source, destination, octets in answered_directly().octets]
    for place, (at, source, destination, octets) in enumerate(flow.octets):
        old = octets.replace(b";tag=9fxced76sl", b"").replace(b";branch=z9hG4bK74bf9", b"")
        flow.octets[place] = (at, source, destination, old)
    one = call(flow)
    assert (one.outcome, one.release_by, one.caller.user) == ("answered", "callee", "alice")


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_any_part_of_an_exchange_makes_calls_without_failing(data: st.DataObject) -> None:
    flow = Flow()
    through_two_proxies(flow, 1, 0)
    flow.request(8000, "bob>proxy2", "BYE", 1, "nashds7", by="callee")
    flow.octets = data.draw(st.lists(st.sampled_from(flow.octets), max_size=20))
    for one in calls_of(sightings(flow)):
        assert one.outcome in ("answered", "cancelled", "refused", "failed", "no reply")
        assert one.started_ns <= one.ended_ns
