"""Offers and answers over time: RFC 3264, the services of RFC 5359, and the examples of RFC 4317."""

from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.signalling.calls import MediaTerm, SipCall
from tests.signalling.talk import MS, Flow, call, calls, described

A, B, C = "192.0.2.101", "192.0.2.201", "192.0.2.100"
OFFER, ANSWER = described(A, 49170), described(B, 3456)


def established() -> Flow:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(1000, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER)
    flow.request(1010, "alice>bob", "ACK", 1, "74bd5")
    return flow


def of_side(one: SipCall, side: str) -> list[tuple[int, int | None, int, str]]:
    """Begin and end in ms, port and direction of what a side announced."""
    return [
        (term.from_ns // MS, None if term.until_ns is None else term.until_ns // MS, term.port, term.direction)
        for term in one.media
        if term.side == side
    ]


def holds(one: SipCall) -> list[tuple[int, int | None, str]]:
    return [(hold.from_ns // MS, hold.until_ns and hold.until_ns // MS, hold.side) for hold in one.holds]


def re_invite(flow: Flow, at: float, number: int, by: str, offer: str, answer: str, status: str = "200 OK") -> None:
    there, back = ("alice>bob", "bob>alice") if by == "caller" else ("bob>alice", "alice>bob")
    flow.request(at, there, "INVITE", number, f"re{number}", by=by, sdp=offer)
    flow.response(at + 50, back, status, "INVITE", number, f"re{number}", by=by, sdp=answer)
    flow.request(at + 60, there, "ACK", number, f"ack{number}", by=by)


def test_rfc_5359_2_1_call_hold_and_back() -> None:
    flow = established()
    hold, held = described(B, 3456, "0", "sendonly"), described(A, 49170, "0", "recvonly")
    re_invite(flow, 5000, 1, "callee", hold, held)
    re_invite(flow, 9000, 2, "callee", ANSWER, OFFER)
    one = call(flow)
    assert holds(one) == [(5000, 9050, "callee")]
    assert of_side(one, "callee") == [
        (1000, 5000, 3456, "sendrecv"),
        (5000, 9000, 3456, "sendonly"),
        (9000, None, 3456, "sendrecv"),
    ]
    assert of_side(one, "caller") == [
        (0, 5050, 49170, "sendrecv"),
        (5050, 9050, 49170, "recvonly"),
        (9050, None, 49170, "sendrecv"),
    ]


def test_hold_by_a_null_address_as_old_gear_does_it() -> None:
    flow = established()
    re_invite(flow, 5000, 2, "caller", described("0.0.0.0", 49170), ANSWER)
    re_invite(flow, 9000, 3, "caller", OFFER, ANSWER)
    one = call(flow)
    assert holds(one) == [(5000, 9050, "caller")]
    assert [term.receives for term in one.media if term.side == "caller"] == [True, False, True]


def test_hold_that_is_never_taken_back_lasts_to_the_end() -> None:
    flow = established()
    re_invite(flow, 5000, 2, "caller", described(A, 49170, "0", "inactive"), described(B, 3456, "0", "inactive"))
    assert holds(call(flow)) == [(5000, None, "caller")]


def test_rfc_5359_2_2_both_may_hold_each_other() -> None:
    flow = established()
    re_invite(flow, 5000, 2, "caller", described(A, 49170, "0", "sendonly"), described(B, 3456, "0", "recvonly"))
    re_invite(flow, 6000, 1, "callee", described(B, 3456, "0", "inactive"), described(A, 49170, "0", "inactive"))
    re_invite(flow, 8000, 3, "caller", OFFER, described(B, 3456, "0", "sendonly"))
    re_invite(flow, 9000, 2, "callee", ANSWER, OFFER)
    assert holds(call(flow)) == [(5000, 8050, "caller"), (6000, 9050, "callee")]


def test_rfc_4317_3_1_an_answer_may_hold_from_the_beginning() -> None:
    flow = Flow()
    flow.invite(0, sdp=described(A, 49170, "0 97", "rtpmap:97 iLBC/8000"))
    flow.response(
        100,
        "bob>alice",
        "200 OK",
        "INVITE",
        1,
        "74bf9",
        sdp=described(B, 49172, "97", "rtpmap:97 iLBC/8000", "sendonly"),
    )
    re_invite(
        flow,
        3000,
        1,
        "callee",
        described(B, 49170, "97", "rtpmap:97 iLBC/8000"),
        described(A, 49178, "97", "rtpmap:97 iLBC/8000"),
    )
    one = call(flow)
    assert holds(one) == [(0, 3050, "callee")]
    assert of_side(one, "caller") == [(0, 3050, 49170, "sendrecv"), (3050, None, 49178, "sendrecv")]


def test_rfc_4317_2_2_a_declined_stream_ends_for_both() -> None:
    video = "m=video 51372 RTP/AVP 31\n"
    flow = Flow()
    flow.invite(0, sdp=OFFER + video)
    flow.response(100, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER + video.replace("51372", "0"))
    one = call(flow)
    assert [(term.side, term.kind, term.until_ns) for term in one.media] == [
        ("caller", "audio", None),
        ("caller", "video", 100 * MS),
        ("callee", "audio", None),
    ]


def test_rfc_4317_2_3_each_side_receives_its_own_payload_types() -> None:
    flow = Flow()
    flow.invite(0, sdp=described(A, 49170, "0 8 97", "rtpmap:97 iLBC/8000"))
    flow.response(
        100, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=described(B, 49172, "99", "rtpmap:99 iLBC/8000")
    )
    caller, callee = call(flow).media
    assert caller.encodings[97].name == callee.encodings[99].name == "iLBC"
    assert 99 not in caller.encodings


def test_early_media_is_early_until_the_answer() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(100, "bob>alice", "183 Session Progress", "INVITE", 1, "74bf9", sdp=ANSWER)
    flow.response(900, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER)
    one = call(flow)
    assert [(term.early, term.from_ns // MS, term.until_ns) for term in one.media if term.side == "callee"] == [
        (True, 100, 900 * MS),
        (False, 900, None),
    ]


def test_the_answer_in_a_reliable_183_holds_on_where_the_200_has_none() -> None:
    """RFC 3262: the answer went with the 183, PRACK acknowledged it."""
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(100, "bob>alice", "183 Session Progress", "INVITE", 1, "74bf9", sdp=ANSWER, extra="RSeq: 1")
    flow.request(150, "alice>bob", "PRACK", 2, "prack")
    flow.response(160, "bob>alice", "200 OK", "PRACK", 2, "prack")
    flow.response(900, "bob>alice", "200 OK", "INVITE", 1, "74bf9")
    assert of_side(call(flow), "callee") == [(100, 900, 3456, "sendrecv"), (900, None, 3456, "sendrecv")]


def test_early_media_of_the_forks_that_lost_ends_with_the_answer() -> None:
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.response(100, "proxy1>alice", "183 Session Progress", "INVITE", 1, "74bf9", tag="one", sdp=ANSWER)
    flow.response(200, "proxy1>alice", "183 Session Progress", "INVITE", 1, "74bf9", tag="two", sdp=described(C, 4000))
    flow.response(900, "proxy1>alice", "200 OK", "INVITE", 1, "74bf9", tag="two", sdp=described(C, 4000))
    one = call(flow)
    assert one.forks == 2
    assert [(t.fork, t.early, t.port, t.from_ns // MS, t.until_ns) for t in one.media if t.side == "callee"] == [
        ("one", True, 3456, 100, 900 * MS),
        ("two", True, 4000, 200, 900 * MS),
        ("two", False, 4000, 900, None),
    ]


def test_a_second_answer_that_is_ended_at_once_does_not_end_the_call() -> None:
    """RFC 3261, 13.2.2.4: the caller acknowledges the other fork's 2xx and sends it a BYE."""
    flow = Flow()
    flow.invite(0, "alice>proxy1", sdp=OFFER)
    flow.response(100, "proxy1>alice", "200 OK", "INVITE", 1, "74bf9", tag="one", sdp=ANSWER)
    flow.response(110, "proxy1>alice", "200 OK", "INVITE", 1, "74bf9", tag="two", sdp=described(C, 4000))
    flow.request(115, "alice>carol", "BYE", 2, "bye2", tag="two")
    flow.request(5000, "bob>alice", "BYE", 1, "bye1", tag="one", by="callee")
    one = call(flow)
    assert (one.released_ns, one.release_by) == (5000 * MS, "callee")


def test_update_before_the_answer_moves_media_of_the_caller() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER)
    flow.response(100, "bob>alice", "183 Session Progress", "INVITE", 1, "74bf9", sdp=ANSWER)
    flow.request(200, "alice>bob", "UPDATE", 2, "upd", sdp=described(A, 50_000))
    flow.response(210, "bob>alice", "200 OK", "UPDATE", 2, "upd", sdp=ANSWER)
    flow.response(900, "bob>alice", "200 OK", "INVITE", 1, "74bf9")
    assert of_side(call(flow), "caller") == [(0, 200, 49170, "sendrecv"), (200, None, 50_000, "sendrecv")]


def test_an_offer_in_the_200_is_answered_in_the_ack() -> None:
    flow = Flow()
    flow.invite(0)
    flow.response(100, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=described(B, 3456, "0", "sendonly"))
    flow.request(110, "alice>bob", "ACK", 1, "74bd5", sdp=described(A, 49170, "0", "recvonly"))
    one = call(flow)
    assert of_side(one, "caller") == [(110, None, 49170, "recvonly")]
    assert holds(one) == [(100, None, "callee")]


def test_a_refused_re_invite_changes_nothing() -> None:
    """RFC 3261, 14.1: after a failure the session goes on as it was."""
    flow = established()
    re_invite(flow, 5000, 2, "caller", described(A, 60_000, "18"), "", "488 Not Acceptable Here")
    one = call(flow)
    assert of_side(one, "caller") == [
        (0, 5000, 49170, "sendrecv"),
        (5000, 5050, 60_000, "sendrecv"),
        (5050, None, 49170, "sendrecv"),
    ]
    assert (one.outcome, one.status_code) == ("answered", 200)


def test_a_change_of_codec_begins_a_new_term() -> None:
    flow = established()
    re_invite(flow, 5000, 2, "caller", described(A, 49170, "8"), described(B, 3456, "8"))
    one = call(flow)
    assert [list(term.encodings) for term in one.terms_at(4000 * MS)] == [[0], [0]]
    assert [list(term.encodings) for term in one.terms_at(6000 * MS)] == [[8], [8]]


def test_a_session_refresh_that_says_the_same_begins_none() -> None:
    flow = established()
    re_invite(flow, 5000, 2, "caller", OFFER, ANSWER)
    assert len(call(flow).media) == 2


def test_t_38_asked_for_within_the_call_makes_it_a_fax_even_if_refused() -> None:
    image = OFFER.replace("m=audio 49170 RTP/AVP 0", "m=image 49180 udptl t38")
    agreed, refused, plain = established(), established(), established()
    re_invite(agreed, 5000, 2, "caller", image, ANSWER.replace("m=audio 3456 RTP/AVP 0", "m=image 3460 udptl t38"))
    re_invite(refused, 5000, 2, "caller", image, "", "488 Not Acceptable Here")
    assert [call(one).fax for one in (agreed, refused, plain)] == [True, True, False]


def test_t_38_offered_beside_audio_and_declined_is_no_fax() -> None:
    flow = Flow()
    flow.invite(0, sdp=OFFER + "m=image 49180 udptl t38\n")
    flow.response(100, "bob>alice", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER + "m=image 0 udptl t38\n")
    assert not call(flow).fax


def test_rfc_5359_2_4_unattended_transfer() -> None:
    """F1 to F10 and F15; the caller is Bob there."""
    flow = Flow()
    flow.invite(0, "bob>alice", sdp=OFFER)
    flow.response(100, "alice>bob", "200 OK", "INVITE", 1, "74bf9", sdp=ANSWER)
    extra = "Refer-To: <sips:carol@chicago.example.com>\nReferred-By: <sips:alice@atlanta.example.com>"
    flow.request(5000, "alice>bob", "REFER", 101, "ref", by="callee", extra=extra)
    flow.response(5010, "bob>alice", "202 Accepted", "REFER", 101, "ref", by="callee")
    kind = "message/sipfrag;version=2.0"
    flow.request(5020, "bob>alice", "NOTIFY", 2, "n1", sdp="SIP/2.0 100 Trying\n", kind=kind)
    flow.request(6000, "alice>bob", "BYE", 102, "bye", by="callee")
    flow.request(8000, "bob>alice", "NOTIFY", 3, "n2", sdp="SIP/2.0 200 OK\n", kind=kind)
    one = call(flow)
    (transfer,) = one.transfers
    assert (transfer.side, transfer.target, transfer.replaces) == ("callee", "sips:carol@chicago.example.com", "")
    assert (transfer.at_ns, transfer.status_code) == (5000 * MS, 200)
    assert (one.release_by, one.ended_ns) == ("callee", 6000 * MS)


def test_rfc_5359_2_5_attended_transfer_names_the_call_that_is_taken_over() -> None:
    first = established()
    target = "<sips:39itp34klkd@chicago.example.com?Replaces=sdjfdjfskdf%40biloxi.example.com%3B"
    extra = f"Refer-To: {target}from-tag%3D8675309%3Bto-tag%3D5f35a3>"
    first.request(5000, "bob>alice", "REFER", 1025, "ref", by="callee", extra=extra)
    third = Flow(
        call_id="9435674543@atlanta.example.com",
        callee="Carol <sips:39itp34klkd@chicago.example.com>",
        caller_tag="3461",
    )
    replaces = "Referred-By: <sips:bob@biloxi.example.com>\n"
    replaces += "Replaces: sdjfdjfskdf@biloxi.example.com;to-tag=5f35a3;from-tag=8675309"
    third.request(5100, "alice>carol", "INVITE", 1, "x", tag="", sdp=OFFER, extra=replaces)
    one, other = calls(first, third)
    assert one.transfers[0].target == "sips:39itp34klkd@chicago.example.com"
    assert one.transfers[0].replaces == other.replaces == "sdjfdjfskdf@biloxi.example.com"
    assert other.referred_by == "sips:bob@biloxi.example.com"


STEPS = st.lists(
    st.tuples(
        st.sampled_from(["caller", "callee"]),
        st.sampled_from([0, 4000, 5000]),
        st.sampled_from([0, 4000, 6000]),
        st.sampled_from(["sendrecv", "sendonly", "recvonly", "inactive"]),
        st.sampled_from(["200 OK", "488 Not Acceptable Here", "491 Request Pending", "401 Unauthorized"]),
    ),
    max_size=12,
)


@settings(max_examples=200, deadline=None)
@given(STEPS)
def test_at_any_time_one_term_at_most_holds_for_a_stream_of_a_side(
    steps: list[tuple[str, int, int, str, str]],
) -> None:
    flow = established()
    for row, (by, offered, answered, direction, status) in enumerate(steps):
        mine, theirs = (A, B) if by == "caller" else (B, A)
        answer = described(theirs, answered) if status == "200 OK" else ""
        re_invite(flow, 2000 + 100 * row, 2 + row, by, described(mine, offered, "0", direction), answer, status)
    one = call(flow)
    for time_ns in range(0, (2000 + 100 * len(steps)) * MS, 25 * MS):
        in_force: list[MediaTerm] = one.terms_at(time_ns)
        streams = [(term.side, term.fork, term.section) for term in in_force]
        assert len(streams) == len(set(streams))
    for hold in one.holds:
        assert hold.until_ns is None or hold.from_ns < hold.until_ns
