"""Link types and link headers, by hand."""

import pytest

from rtpaudit.decode.link import LINK_TYPES, link_type
from tests.craft import ethernet, ipv4, udp
from tests.decode.made import Row, decoded
from tests.decode.specimens import CARRIERS, FOUR, SOUND, cooked, cooked_2, pppoe


def only(rows: list[Row]) -> Row:
    (row,) = rows
    return row


@pytest.mark.parametrize("name", CARRIERS)
def test_the_datagram_is_found_behind(name: str) -> None:
    link, frame = CARRIERS[name]
    row = only(decoded(frame, link_type=link)[0])
    assert (row.source_port, row.destination_port, row.octets) == (4000, 4002, SOUND)
    assert (row.dscp, row.ttl) == (46, 61)


def test_the_innermost_vlan_is_kept() -> None:
    assert only(decoded(ethernet(FOUR, vlans=[100, 200]))[0]).vlan == 200


def test_a_priority_tag_is_no_vlan() -> None:
    assert only(decoded(ethernet(FOUR, vlans=[0]))[0]).vlan == 0
    assert only(decoded(ethernet(FOUR, vlans=[100, 0xE000]))[0]).vlan == 100


NO_IP = {
    "ARP": ethernet(b"\0\x01\x08\0\x06\x04" + bytes(22), 0x0806),
    "link layer discovery": ethernet(bytes(40), 0x88CC),
    "spanning tree": ethernet(b"\x42\x42\x03" + bytes(35), 38),
    "a discovery protocol in SNAP": ethernet(b"\xaa\xaa\x03\0\0\x0c\x20\0" + bytes(30), 38),
    "PPPoE discovery": ethernet(b"\x11\x09\0\0\0\0" + bytes(40), 0x8863),
    "a PPPoE code that is no session": ethernet(b"\x11\x65" + bytes(40), 0x8864),
    "PPP link control": ethernet(pppoe(b"\xc0\x21", bytes(40)), 0x8864),
}


@pytest.mark.parametrize("name", NO_IP)
def test_frames_without_ip_are_counted_and_never_reach_the_slow_path(name: str) -> None:
    rows, decoder = decoded(NO_IP[name])
    assert rows == []
    assert decoder.skipped == {"not IP": 1}
    assert decoder._path.slow.classes == {}


def test_netlink_messages_in_cooked_captures_are_no_ip() -> None:
    for link, frame in ((113, cooked(0x0800, FOUR, hardware=824)), (276, cooked_2(0x0800, FOUR, hardware=824))):
        assert decoded(frame, link_type=link)[1].skipped == {"not IP": 1}


def test_a_stack_of_tags_without_end_is_left_out() -> None:
    rows, decoder = decoded(ethernet(FOUR, vlans=[5] * 200))
    assert rows == []
    assert decoder.skipped == {"too many headers inside each other": 1}


def test_an_unknown_link_type_is_damage_once_for_each_file() -> None:
    rows, decoder = decoded(FOUR, FOUR, link_type=147)
    assert rows == []
    assert decoder.skipped == {"unknown link type": 2}
    (damage,) = decoder.damage
    assert (damage.capture, damage.offset) == ("made.pcap", 0)
    assert "147" in damage.what


def test_two_entries_for_one_link_type_are_refused() -> None:
    with pytest.raises(ValueError, match="link type 113 is registered twice"):
        link_type(113)(lambda _frame: ("Raw", 0))
    assert LINK_TYPES[113].slow_entry(b"") == ("CookedLinux", 0)


def test_padding_up_to_the_shortest_ethernet_frame_is_no_payload() -> None:
    frame = ethernet(ipv4(udp(b"hello"))).ljust(60, b"\xee")
    assert only(decoded(frame)[0]).octets == b"hello"
