from rtpaudit.signalling.legs import legs_of
from tests.signalling.talk import HOSTS, Flow, described, sightings

A, B, R = described("192.0.2.101", 4000), described("192.0.2.201", 5000), described("192.0.2.128", 6000)


def through(flow: Flow, *hops: tuple[str, str, str]) -> list[list[str]]:
    """Sources of the INVITEs of every leg, of a call over hops of (path, offer, answer)."""
    vias = ""
    for at, (path, offer, _) in enumerate(hops):
        vias = f"h{at} {vias}".strip()
        flow.invite(at, path, via=vias, sdp=offer)
    for at, (path, _, answer) in reversed(list(enumerate(hops))):
        back = ">".join(reversed(path.split(">")))
        flow.response(100 - at, back, "200 OK", "INVITE", 1, " ".join(f"h{k}" for k in range(at, -1, -1)), sdp=answer)
    flow.octets.sort()
    names = {place: name for name, place in HOSTS.items()}
    return [
        [names[one.row.source] for one in leg.sightings if one.request and one.method == "INVITE"]
        for leg in legs_of(sightings(flow))
    ]


def test_hops_with_the_same_media_are_one_leg() -> None:
    assert through(Flow(), ("alice>proxy1", A, B), ("proxy1>proxy2", A, B), ("proxy2>bob", A, B)) == [
        ["alice", "proxy1", "proxy2"]
    ]


def test_a_relay_in_the_middle_parts_the_hops_before_it_from_those_behind() -> None:
    relay = described("192.0.2.128", 6002)
    hops = (("alice>proxy1", A, R), ("proxy1>alg", A, R), ("alg>proxy2", relay, B), ("proxy2>bob", relay, B))
    assert through(Flow(), *hops) == [["alice", "proxy1"], ["alg", "proxy2"]]


def test_an_address_translated_on_one_side_only_parts_nothing() -> None:
    outside = described("203.0.113.9", 4000)
    assert through(Flow(), ("alice>alg", A, B), ("alg>bob", outside, B)) == [["alice", "alg"]]


def test_hops_without_any_description_part_nothing() -> None:
    assert through(Flow(), ("alice>proxy1", "", ""), ("proxy1>bob", "", "")) == [["alice", "proxy1"]]


def test_two_callers_under_one_call_id_are_two_legs() -> None:
    flow = Flow()
    flow.invite(0)
    other = Flow(caller_tag="another", callee_tag="x")
    other.invite(5, "proxy1>bob", via="other")
    assert [leg.caller_tag for leg in legs_of(sightings(flow, other))] == ["9fxced76sl", "another"]


def test_answers_that_come_by_another_port_stay_with_their_request() -> None:
    flow = Flow()
    flow.invite(0, "192.0.2.101:32000>192.0.2.201:5060", sdp=A)
    flow.response(5, "192.0.2.201:5060>192.0.2.101:5060", "200 OK", "INVITE", 1, "74bf9", sdp=B)
    (leg,) = legs_of(sightings(flow))
    assert [leg.sender(one) for one in leg.sightings] == ["caller", "callee"]


def test_subscriptions_are_no_legs() -> None:
    flow = Flow()
    flow.request(0, "alice>bob", "REFER", 1, "r", tag="")
    flow.request(5, "bob>alice", "NOTIFY", 1, "n", by="callee")
    assert legs_of(sightings(flow)) == []


def test_more_pairs_of_addresses_than_a_path_can_have_are_one_leg() -> None:
    flow = Flow()
    for row in range(500):
        flow.invite(
            row, f"192.0.2.{row % 250}:{row}>192.0.2.201:5060", via=f"b{row}", sdp=described("192.0.2.1", 2 * row + 2)
        )
    assert len(legs_of(sightings(flow))) == 1
