"""The excerpt holds the packets of the chosen calls and of no other, and read again it tells of them the same."""

from pathlib import Path

import pandas as pd
import pytest

import rtpaudit
from rtpaudit import Selection
from rtpaudit.columns import TABLES
from rtpaudit.errors import UnusableArguments, UnusableOutput
from rtpaudit.report.excerpt import refuse_excerpt
from tests.capture.reading import read, read_file
from tests.craft import ethernet, ipv4, pcap, udp
from tests.crafted_calls import Datagram, Made, capture, over_tcp

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"
# Numbered anew in a file of some calls.
NAMES = {"call", "stream", "conversation", "capture", "frame"}


def same(one: rtpaudit.Audit, other: rtpaudit.Audit, calls: list[str]) -> None:
    """Every table of one audit tells of some of its calls what another tells of all of its own."""
    streams = one.streams.stream[one.streams.call.isin(calls)]
    for name in set(TABLES) - {"damage"}:
        mine, theirs = one.tables[name], other.tables[name]
        mine = mine[mine.call.isin(calls) if "call" in mine else mine.stream.isin(streams)]
        columns = [column for column in mine if column not in NAMES]
        pd.testing.assert_frame_equal(mine[columns].reset_index(drop=True), theirs[columns])


@pytest.mark.parametrize(
    ("name", "call", "calls"),
    [
        ("clean-pcmu-udp.a.pcap", "c01", ["c01"]),
        ("sip-tcp.a.pcap", "c01", ["c01"]),
        ("dtmf-rfc4733.b-any-sll.pcap", "c01", ["c01"]),
        ("xr-loss3.a.pcap", "c01", ["c01"]),
        ("edited-one-interface.pcapng", "c01", ["c01"]),
        ("proxy-two-legs.mon.pcap", "c03", ["c03", "c04"]),
    ],
)
def test_read_again_it_gives_the_same_figures(tmp_path: Path, name: str, call: str, calls: list[str]) -> None:
    chosen = rtpaudit.audit(CAPTURES / name, select=Selection(calls=(call,)))
    (written,) = chosen.excerpt(tmp_path / "excerpt.pcapng")
    same(rtpaudit.audit(CAPTURES / name), rtpaudit.audit(written), calls)


ONE, TWO = Made(1), Made(2, at_s=0.5, caller="<sip:harbour@192.0.2.10>")


def excerpt_of(tmp_path: Path, octets: bytes, call: str) -> tuple[rtpaudit.Audit, Path]:
    (tmp_path / "made.pcap").write_bytes(octets)
    chosen = rtpaudit.audit(tmp_path / "made.pcap", select=Selection(calls=(call,)))
    (written,) = chosen.excerpt(tmp_path / "excerpt.pcapng")
    return rtpaudit.audit(written), written


def test_frames_times_and_lengths_are_the_originals_and_those_of_others_are_not_there(tmp_path: Path) -> None:
    octets = capture([*ONE.all(), *TWO.all()])
    _, written = excerpt_of(tmp_path, octets, "c02")
    wanted = sorted((one.time_ns, one.frame()) for one in TWO.all())
    assert sorted((one.time_ns, one.octets) for one in read_file(written).frames) == wanted
    assert [one.link_type for one in read_file(written).interfaces] == [1]


def test_what_a_snap_length_cut_keeps_its_length_on_the_wire(tmp_path: Path) -> None:
    whole = read(capture(ONE.all())).frames
    cut = [one.octets[:100] if one.original == 214 else one.octets for one in whole]
    octets = pcap(cut, [one.time_ns for one in whole], originals=[one.original for one in whole], nanoseconds=True)
    _, written = excerpt_of(tmp_path, octets, "c01")
    found = read_file(written).frames
    assert [one.octets for one in found] == cut
    assert [one.original for one in found] == [one.original for one in whole]


@pytest.mark.parametrize("size", [120, 300, 480, 1000])
def test_of_a_connection_of_many_calls_only_segments_with_messages_of_the_chosen_one_go(
    tmp_path: Path, size: int
) -> None:
    three = [Made(number, at_s=0.01 * number, caller=f"<sip:caller{number}@192.0.2.10>") for number in (1, 2, 3)]
    messages = sorted((one for made in three for one in made.signalling()), key=lambda one: one.time_ns)
    segments = over_tcp(messages, size)
    media = [(one.time_ns, one.frame()) for made in three for one in made.media()]
    rows = sorted([(time_ns, frame) for time_ns, frame, _ in segments] + media)
    octets = pcap([frame for _, frame in rows], [time_ns for time_ns, _ in rows], nanoseconds=True)
    again, written = excerpt_of(tmp_path, octets, "c02")
    id_ = three[1].call_id
    wanted = [frame for _, frame, of in segments if id_ in of]
    found = [one.octets for one in read_file(written).frames]
    assert sorted(frame for frame in found if frame[23] == 6) == sorted(wanted)
    assert len(wanted) < len(segments) or size == 1000
    mine = again.calls[again.calls.call_id == id_].iloc[0]
    assert (mine.outcome, mine.streams, mine.release_by) == ("answered", 2, "caller")


def test_a_message_in_fragments_comes_whole(tmp_path: Path) -> None:
    rows = [row for one in ONE.all() for row in in_fragments(one)]
    octets = pcap([frame for _, frame in sorted(rows)], [time_ns for time_ns, _ in sorted(rows)], nanoseconds=True)
    again, written = excerpt_of(tmp_path, octets, "c01")
    assert len(rows) > len(ONE.all())
    assert len(read_file(written).frames) == len(rows)
    assert again.calls.outcome.tolist() == ["answered"]


def in_fragments(one: Datagram) -> list[tuple[int, bytes]]:
    """Time and frame of each fragment of 240 octets; the datagram itself where it fits into one of 300."""
    packet = udp(one.payload, one.source[1], one.destination[1])
    if len(packet) <= 300:
        return [(one.time_ns, one.frame())]
    return [
        (
            one.time_ns + first,
            ethernet(
                ipv4(
                    packet[first : first + 240], one.source[0], one.destination[0], identification=77,
                    fragment_offset=first, more_fragments=first + 240 < len(packet),
                )
            ),
        )
        for first in range(0, len(packet), 240)
    ]  # fmt: skip


def test_the_files_of_a_ring_become_one(tmp_path: Path) -> None:
    whole = read(capture([*ONE.all(), *TWO.all()])).frames
    for name, part in (("a.pcap", whole[:120]), ("b.pcap", whole[120:])):
        (tmp_path / name).write_bytes(
            pcap([one.octets for one in part], [one.time_ns for one in part], nanoseconds=True)
        )
    chosen = rtpaudit.audit(tmp_path / "a.pcap", tmp_path / "b.pcap", select=Selection(calls=("c01",)))
    (written,) = chosen.excerpt(tmp_path / "excerpt.pcapng")
    again = rtpaudit.audit(written)
    same(chosen, again, ["c01"])
    assert len(read_file(written).interfaces) == 1


def test_two_capture_points_make_a_file_each(tmp_path: Path) -> None:
    points = [CAPTURES / f"combo-two-segments.{point}.pcap" for point in "ab"]
    audit = rtpaudit.audit(*points)
    written = audit.excerpt(tmp_path / "excerpt.pcapng")
    assert [path.name for path in written] == ["excerpt.pcapng", "excerpt-2.pcapng"]
    lost = sorted(loss for path in written for loss in rtpaudit.audit(path).streams.packets_lost)
    assert lost == sorted(audit.streams.packets_lost)


def test_an_earlier_excerpt_is_replaced_and_anything_else_is_not(tmp_path: Path) -> None:
    octets = capture(ONE.all())
    _, written = excerpt_of(tmp_path, octets, "c01")
    excerpt_of(tmp_path, octets, "c01")
    written.write_bytes(octets)
    with pytest.raises(UnusableOutput, match="is no excerpt"):
        excerpt_of(tmp_path, octets, "c01")
    assert written.read_bytes() == octets
    assert sorted(path.name for path in tmp_path.iterdir()) == ["excerpt.pcapng", "made.pcap"]


def test_an_excerpt_does_not_replace_itself_while_it_is_read(tmp_path: Path) -> None:
    _, written = excerpt_of(tmp_path, capture(ONE.all()), "c01")
    with pytest.raises(UnusableOutput, match="is itself a capture"):
        refuse_excerpt(written, [tmp_path / "made.pcap", written])


@pytest.mark.parametrize("name", ["missing/excerpt.pcapng", "."])
def test_a_place_where_no_file_can_be_is_refused(tmp_path: Path, name: str) -> None:
    with pytest.raises(UnusableOutput):
        refuse_excerpt(tmp_path / name)


def test_without_a_call_there_is_nothing_to_write(tmp_path: Path) -> None:
    audit = rtpaudit.audit(CAPTURES / "no-rtp-quic-over-ppp.pcap")
    with pytest.raises(UnusableArguments, match="no call"):
        audit.excerpt(tmp_path / "excerpt.pcapng")
