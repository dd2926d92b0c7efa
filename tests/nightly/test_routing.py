"""Routes: any rule fits, the first route wins."""

import pytest

from rtpaudit.nightly.routing import Router, Way
from rtpaudit.profile import Route

ROUTES = (
    Route("by address", addresses=("192.0.2.0/25", "2001:db8:1::/48")),
    Route("by number", numbers=("+44141", "0150-0159")),
    Route("by vlan", vlans=(110,)),
    Route("by trunk", trunks=("north-a",)),
    Route("shadowed", addresses=("192.0.2.1",)),
)


@pytest.mark.parametrize(
    ("way", "route"),
    [
        (Way(addresses=frozenset({"203.0.113.1", "192.0.2.1"})), "by address"),
        (Way(addresses=frozenset({"192.0.2.128"})), ""),
        (Way(addresses=frozenset({"2001:db8:1::9"})), "by address"),
        (Way(addresses=frozenset({"no address"})), ""),
        (Way(numbers=("+441414960123", "anna")), "by number"),
        (Way(numbers=("+44142",)), ""),
        (Way(numbers=("0155",)), "by number"),
        (Way(numbers=("01550",)), ""),
        (Way(numbers=("0160",)), ""),
        (Way(vlans=frozenset({110})), "by vlan"),
        (Way(vlans=frozenset({0, 11})), ""),
        (Way(signalling=("INVITE sip:+44141;tgrp=north-a@192.0.2.1",)), "by trunk"),
        (Way(signalling=("INVITE sip:+44141;tgrp=north-ab@192.0.2.1",)), ""),
        (Way(), ""),
    ],
)
def test_a_call_goes_by_the_first_route_that_fits(way: Way, route: str) -> None:
    assert Router(ROUTES).route(way) == route


def test_rules_that_ask_the_signalling_are_known() -> None:
    assert not Router(ROUTES[:1]).reads_signalling
    assert Router(ROUTES[1:2]).reads_signalling
    assert Router(ROUTES[3:4]).reads_signalling
