"""What blocks say of interfaces, cut anywhere."""

from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.capture.frames import Interface
from rtpaudit.capture.pcapng_options import NO_LIMIT, UNKNOWN_LINK_TYPE, describe, options, statistics
from tests.craft import pcapng_interface, pcapng_options, pcapng_statistics

FOUND = {2: b"eth0", 9: b"\x09", 14: bytes(8)}


def test_options_are_read_up_to_a_cut() -> None:
    whole = pcapng_options(list(FOUND.items()))
    for cut in range(len(whole)):
        found = options(whole[:cut], big=False)
        assert found == dict(list(FOUND.items())[: len(found)])
    assert options(whole, big=False) == FOUND


def test_every_cut_of_a_description_describes_something() -> None:
    body = pcapng_interface(113, 96, list(FOUND.items()))[8:-4]
    for cut in range(len(body)):
        interface, _ = describe(body[:cut], big=False)
        assert interface.link_type == (113 if cut >= 8 else UNKNOWN_LINK_TYPE)
    assert describe(body, big=False) == (Interface(113, "eth0", 96), (0, 1, 0))


def test_every_cut_of_statistics_says_nothing_wrong() -> None:
    body = pcapng_statistics(3, 1000, 10)[8:-4]
    seen = {statistics(body[:cut], big=False) for cut in range(len(body) + 1)}
    assert seen == {(-1, None, None), (3, None, None), (3, 1000, None), (3, 1000, 10)}


@given(octets=st.binary(max_size=200), big=st.booleans())
def test_noise_is_read_as_something(octets: bytes, big: bool) -> None:
    assert all(len(value) <= len(octets) for value in options(octets, big).values())
    interface, (_, factor, _) = describe(octets, big)
    assert 0 <= interface.link_type <= 0xFFFF
    assert factor >= 0
    assert statistics(octets, big)[0] >= -1
    assert NO_LIMIT > 0xFFFF
