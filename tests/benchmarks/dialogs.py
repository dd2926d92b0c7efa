"""SIP dialogs of many calls as pcap records: ``python -m tests.benchmarks.dialogs [CALLS]`` times an audit of them.

Nothing here is asserted.
"""

import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import rtpaudit
from tests.craft import ethernet, ipv4, pcap, udp

SIP_PORT = 5060
RECORD_HEAD = 24
"""octets of the file header that ``pcap`` puts before its records"""
MS = 1_000_000
OPENING = ((0, True, "INVITE"), (15, False, "100"), (120, False, "180"), (900, False, "200"), (930, True, "ACK"))
CLOSING = ((0, True, "BYE"), (20, False, "200"))

End = tuple[str, int]
"""address and media port"""


def opening(call: int, ends: Sequence[End], at_ns: int) -> list[tuple[int, bytes]]:
    """Time and record of each message from INVITE to ACK."""
    return [_record(call, ends, at_ns + after * MS, out, what, "INVITE") for after, out, what in OPENING]


def closing(call: int, ends: Sequence[End], at_ns: int) -> list[tuple[int, bytes]]:
    """Time and record of BYE and its answer."""
    return [_record(call, ends, at_ns + after * MS, out, what, "BYE") for after, out, what in CLOSING]


def _record(call: int, ends: Sequence[End], at_ns: int, out: bool, what: str, method: str) -> tuple[int, bytes]:
    (a, a_port), (b, b_port) = ends
    start = f"{what} sip:0{call:05d}@{b} SIP/2.0" if out else f"SIP/2.0 {what} Said"
    number = 2 if method == "BYE" else 1
    place = (a, a_port) if out else (b, b_port)
    sdp = ""
    if what == "INVITE" or (what == "200" and method == "INVITE"):
        sdp = (
            f"v=0\r\no=- {call} 1 IN IP4 {place[0]}\r\ns=-\r\nc=IN IP4 {place[0]}\r\nt=0 0\r\n"
            f"m=audio {place[1]} RTP/AVP 0 101\r\na=rtpmap:0 PCMU/8000\r\na=rtpmap:101 telephone-event/8000\r\n"
            "a=fmtp:101 0-15\r\na=ptime:20\r\na=sendrecv\r\n"
        )
    tag = "" if what == "INVITE" else f";tag=b{call}"
    kind = "Content-Type: application/sdp\r\n" if sdp else ""
    branch = f"z9hG4bK{call}.{number}.{what if what == 'ACK' else ''}"
    text = "\r\n".join(
        [
            start,
            f"Via: SIP/2.0/UDP {a}:5060;branch={branch};rport",
            "Max-Forwards: 70",
            f'From: "Desk {call}" <sip:1{call:05d}@{a}>;tag=a{call}',
            f"To: <sip:0{call:05d}@{b}>{tag}",
            f"Call-ID: {call}-7f3a9c1d5b@{a}",
            f"CSeq: {number} {what if what == 'ACK' else method}",
            f"Contact: <sip:1{call:05d}@{place[0]}:5060>",
            "User-Agent: Made up 1.0",
            "Allow: INVITE, ACK, CANCEL, BYE, OPTIONS",
            f"{kind}Content-Length: {len(sdp)}",
            "",
            sdp,
        ]
    )
    source, destination = (a, b) if out else (b, a)
    frame = ethernet(ipv4(udp(text.encode(), SIP_PORT, SIP_PORT), source, destination))
    return at_ns, pcap([frame], [at_ns])[RECORD_HEAD:]


def timed(job: Callable[[], Any]) -> tuple[float, Any]:
    """Seconds of one run and what it gave."""
    begun = time.perf_counter()
    made = job()
    return time.perf_counter() - begun, made


def times_of(path: Path, folder: Path) -> None:
    """Print seconds of the parts of an audit."""
    from rtpaudit import Selection

    audited, audit = timed(lambda: rtpaudit.audit(path))
    packets_alone = timed(lambda: rtpaudit.audit(path, sound=False))[0]
    one_call = timed(lambda: rtpaudit.audit(path, select=Selection(calls=("c07",))).tables)[0]
    report = timed(lambda: audit.write(folder))[0]
    print(f"  audit {audited:.1f} s, without sound {packets_alone:.1f} s, report {report:.1f} s")
    print(f"  one call of them {one_call:.1f} s")


def main(calls: int) -> None:
    """Make captures of so many calls, without media and with half a second of it, and time audits of them."""
    from tests.benchmarks.lines import make_capture

    demo = Path(rtpaudit.__file__).parent / "demo" / "demo.pcap"
    rtpaudit.audit(demo).tables  # noqa: B018  loads kernels and libraries
    with tempfile.TemporaryDirectory() as place:
        for seconds in (0.0, 0.5):
            path = Path(place) / f"dialogs-{seconds}.pcap"
            packets = make_capture(path, calls, seconds, dialogs=True)
            print(f"{calls:,} dialogs, {packets:,} RTP packets, {path.stat().st_size / 1e6:.0f} MB")
            times_of(path, Path(place) / "report")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 20_000)
