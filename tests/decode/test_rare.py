"""The slow path: what only scapy reads, and how much of it."""

import os
import subprocess
import sys

import pytest

from rtpaudit.decode import Decoder, rare
from rtpaudit.decode.layers import IPV4, IPV6, NOT_IP
from rtpaudit.decode.rare import SlowPath
from tests.craft import ethernet, ipv4, udp
from tests.decode.made import decoded, frames_of
from tests.decode.specimens import FOUR, RADIO, SIX, SOUND, SPECIMENS

UNKNOWN = ethernet(bytes(60), 0x7777)


def test_a_datagram_behind_a_radio_header_goes_the_whole_way() -> None:
    ((row,), decoder) = decoded(RADIO + FOUR, link_type=127)
    assert (row.octets, row.source_port, row.dscp) == (SOUND, 4000, 46)
    assert decoder.skipped == {}


def test_fragments_and_tunnels_behind_a_radio_header_go_the_whole_way() -> None:
    datagram = udp(SOUND, 4000, 4002)
    pieces = [
        RADIO + ipv4(datagram[:80], identification=3, more_fragments=True),
        RADIO + ipv4(datagram[80:], identification=3, fragment_offset=80),
    ]
    ((row,), _) = decoded(*pieces, link_type=127)
    assert (row.frame, row.octets) == (2, SOUND)
    ((row,), _) = decoded(RADIO + ipv4(SIX, protocol=41), link_type=127)
    assert row.octets == SOUND


def test_a_link_type_that_only_scapy_knows_is_read() -> None:
    """LINKTYPE 204: PPP with one octet for the direction."""
    ((row,), _) = decoded(b"\x01\0\x21" + FOUR, link_type=204)
    assert row.octets == SOUND


def test_unknown_ethertypes_are_no_ip_after_a_look() -> None:
    rows, decoder = decoded(UNKNOWN)
    assert rows == []
    assert decoder.skipped == {"not IP": 1}
    assert decoder._path.slow.left == rare.MOST_FRAMES - 1


def test_plain_captures_never_load_scapy() -> None:
    plain = [name for name in SPECIMENS if name not in ("radiotap", "an EtherType for backbone bridges")]
    for name in plain:
        link_type, frame = SPECIMENS[name]
        assert decoded(frame, link_type=link_type)[1]._path.slow.classes == {}, name


def test_a_sort_of_frame_that_never_holds_ip_is_left_out_in_the_end(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(rare, "MOST_IN_VAIN", 3)
    slow = SlowPath()
    assert [slow.find_ip(UNKNOWN, 1, 0x7777)[0] for _ in range(5)] == [NOT_IP] * 5
    assert slow.left == rare.MOST_FRAMES - 3


def test_a_sort_that_held_ip_once_is_always_read(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(rare, "MOST_IN_VAIN", 3)
    slow = SlowPath()
    bridged = SPECIMENS["an EtherType for backbone bridges"][1]
    assert slow.find_ip(bridged, 1, 0x88E7) == (IPV4, 14 + 4 + 18, 9)
    for _ in range(9):
        slow.find_ip(UNKNOWN, 1, 0x88E7)
    assert slow.find_ip(bridged, 1, 0x88E7)[0] == IPV4


def test_more_rare_frames_than_are_read_are_damage() -> None:
    decoder = Decoder()
    decoder._path.slow.left = 2
    (packets,) = decoder.decode(frames_of([RADIO + FOUR] * 5, 127), "made.pcap")
    assert packets.frame.tolist() == [1, 2]
    assert decoder.skipped == {"slow path exhausted": 3}
    (damage,) = decoder.damage
    assert damage.offset == 2 * len(RADIO + FOUR)


@pytest.mark.parametrize("name", SPECIMENS)
def test_every_prefix_and_noise_is_found_or_refused(name: str) -> None:
    link_type, frame = SPECIMENS[name]
    slow = SlowPath(left=rare.MOST_FRAMES)
    for length in range(min(len(frame), 90)):
        layer, at, _ = slow.find_ip(frame[:length], link_type, 0)
        assert layer not in (IPV4, IPV6) or 0 <= at <= length
    for octet in range(0, 256, 5):
        slow.find_ip(bytes([octet]) * 60, link_type, 0)


PROGRAM = """
import sys
sys.path.insert(0, {root!r})
from rtpaudit.decode.rare import SlowPath
from tests.decode.specimens import FOUR, RADIO
assert SlowPath().find_ip(RADIO + FOUR, 127, 0)[0] == 20
"""


def test_scapy_comes_without_a_word_and_without_folders(tmp_path, monkeypatch: pytest.MonkeyPatch) -> None:
    root = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    environment = {name: value for name, value in os.environ.items() if not name.startswith("XDG_")}
    environment["HOME"] = str(tmp_path)
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", PROGRAM.format(root=root)],
        env=environment,
        cwd=tmp_path,
        capture_output=True,
        check=False,
        text=True,
    )
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")
    assert list(tmp_path.iterdir()) == []


def test_the_environment_is_as_before_after_scapy_came(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", "/somewhere")
    monkeypatch.delenv("XDG_CONFIG_HOME", raising=False)
    rare.load_scapy()
    assert os.environ["XDG_CACHE_HOME"] == "/somewhere"
    assert "XDG_CONFIG_HOME" not in os.environ
