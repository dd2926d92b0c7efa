"""One file, however it comes."""

import gzip
import io
import lzma
import os
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pyarrow
import pytest

from rtpaudit.capture import files
from rtpaudit.capture.files import open_file, why
from rtpaudit.errors import UnreadableCapture
from tests.capture.reading import read, read_file
from tests.craft import PACKET_TIME_NS, START_NS, pcap, pcapng, pcapng_statistics, rtp_frame, spaced

FRAMES = [rtp_frame(number) for number in range(50)]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return tmp_path


def put(path: Path, octets: bytes) -> Path:
    path.write_bytes(octets)
    return path


def refused(path: Path | str) -> str:
    with pytest.raises(UnreadableCapture) as raised:
        open_file(str(path))
    return str(raised.value)


def test_the_name_of_a_file_does_not_matter(folder: Path) -> None:
    assert read_file(put(folder / "notes.txt", pcapng(FRAMES))).octets == FRAMES
    assert read_file(put(folder / "call.pcapng", pcap(FRAMES))).octets == FRAMES
    assert read_file(put(folder / "call.pcap", gzip.compress(pcap(FRAMES)))).octets == FRAMES


@pytest.mark.parametrize("plain", [pcap(FRAMES), pcapng(FRAMES)], ids=["pcap", "pcapng"])
def test_compressed_captures_read_like_plain_ones(folder: Path, plain: bytes) -> None:
    for packed in (gzip.compress(plain), lzma.compress(plain), pyarrow.compress(plain, codec="zstd", asbytes=True)):
        reading = read_file(put(folder / "call", packed))
        assert reading.frames == read(plain).frames
        assert reading.damage == []


def test_a_cut_compressed_capture_gives_what_was_in_it(folder: Path) -> None:
    packed = gzip.compress(pcap(FRAMES))
    reading = read_file(put(folder / "call.gz", packed[: len(packed) // 2]))
    assert 0 < len(reading.frames) < 50
    assert reading.octets[:-1] == FRAMES[: len(reading.octets) - 1]
    assert reading.damage[0].what.startswith("gzip: ")
    assert reading.damage[0].lost == "all that follows"


def test_a_file_read_twice_tells_its_damage_once(folder: Path) -> None:
    file = open_file(str(put(folder / "call.pcap", pcap(FRAMES)[:-10])))
    for _ in range(3):
        assert sum(len(batch) for batch in file.batches(7)) == 50
        assert len(file.damage) == 1
    early = file.batches(7)
    next(early)
    assert len(file.damage) == 1


def test_interfaces_are_complete_after_the_last_batch(folder: Path) -> None:
    file = open_file(str(put(folder / "call", pcapng(FRAMES) + pcapng_statistics(0, 50, 3))))
    for _ in range(2):
        assert len(list(file.batches(7))) == 8
        assert [(one.received, one.dropped) for one in file.interfaces] == [(50, 3)]


def test_octets_are_mapped_and_cannot_be_written(folder: Path) -> None:
    file = open_file(str(put(folder / "call", pcap(FRAMES))))
    assert file.octets.dtype == np.uint8
    assert not file.octets.flags.writeable
    assert not file.octets.flags.owndata


def test_a_file_that_grows_is_read_up_to_its_size_at_first(folder: Path) -> None:
    path = put(folder / "call", pcap(FRAMES[:3]))
    file = open_file(str(path))
    with path.open("ab") as growing:
        growing.write(pcap(FRAMES[3:])[24:])
    assert sum(len(batch) for batch in file.batches()) == 3


def test_a_named_pipe_is_read_once_into_a_temporary_file(folder: Path) -> None:
    path = folder / "pipe"
    os.mkfifo(path)
    writer = threading.Thread(target=path.write_bytes, args=(gzip.compress(pcap(FRAMES)),))
    writer.start()
    assert read_file(path).octets == FRAMES
    writer.join()


@pytest.mark.parametrize("packed", [False, True])
def test_standard_input_is_read(packed: bool) -> None:
    script = (
        "from rtpaudit.capture.files import open_file\n"
        "file = open_file('-')\n"
        "print(file.name, sum(len(batch) for batch in file.batches()), len(file.damage))"
    )
    octets = gzip.compress(pcap(FRAMES)) if packed else pcap(FRAMES)
    run = subprocess.run([sys.executable, "-c", script], input=octets, capture_output=True, check=True)
    assert run.stdout.split() == [b"stdin", b"50", b"0"]


def test_standard_input_that_brings_nothing_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    class Terminal(io.BytesIO):
        def isatty(self) -> bool:
            return True

    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(Terminal()))
    assert refused("-") == "standard input: brings no capture: redirect or pipe one into it"
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(b"no capture")))
    assert refused("-").startswith("standard input: holds text")


def test_each_thing_that_is_no_capture_has_its_own_sentence(folder: Path) -> None:
    sentences = [
        refused(folder / "missing.pcap"),
        refused(folder),
        refused(put(folder / "empty.pcap", b"")),
        refused(put(folder / "text.pcap", b"# calls of last night\n")),
        refused(put(folder / "short.pcap", pcap([])[:20])),
        refused(put(folder / "other.pcap", bytes(range(100)))),
        refused(put(folder / "nothing.gz", gzip.compress(b""))),
        refused(put(folder / "text.gz", gzip.compress(b"# calls of last night\n"))),
        refused(put(folder / "short.gz", gzip.compress(pcap([])[:20]))),
        refused(put(folder / "broken.gz", gzip.compress(pcap([]))[:12])),
        refused("a\0b"),
    ]
    assert len({sentence.split(": ", 1)[1] for sentence in sentences}) == len(sentences)
    for sentence, offset in zip(
        sentences, ["", "", "", "", "offset 20", "offset 0", "", "", "offset 20", "", ""], strict=True
    ):
        assert offset in sentence
        assert sentence.count(": ") >= 2
        assert "\n" not in sentence


def test_what_the_system_refuses_is_said_in_words() -> None:
    assert why(PermissionError(13, "Permission denied")).startswith("may not be read by this user: ")
    assert why(OSError(24, "Too many open files")).startswith("is one file too many")
    assert why(OSError(5, "Input/output error")) == (
        "cannot be read (Input/output error): check the disk, or copy the file elsewhere"
    )


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is forbidden to this user")
def test_a_file_that_may_not_be_read_is_refused(folder: Path) -> None:
    path = put(folder / "secret.pcap", pcap(FRAMES))
    path.chmod(0)
    assert "may not be read by this user" in refused(path)


def test_a_hostile_name_is_shown_without_its_escapes(folder: Path) -> None:
    path = put(folder / "\x1b[2J\n.pcap", b"")
    assert "\x1b" not in refused(path)
    assert open_file(str(put(path, pcap(FRAMES)))).name == "\\x1b[2J\\n.pcap"


def test_a_refused_file_is_closed(folder: Path) -> None:
    path = put(folder / "text.pcap", b"# calls of last night\n")
    before = len(os.listdir("/proc/self/fd")) if Path("/proc/self/fd").exists() else 0
    for _ in range(5):
        refused(path)
    after = len(os.listdir("/proc/self/fd")) if before else 0
    assert after == before


@pytest.mark.parametrize("make", [pcap, pcapng])
@pytest.mark.parametrize("spoil", ["", "cut", "noise", "section", "step"])
def test_the_ends_of_a_long_file_tell_its_span_as_reading_it_does(
    folder: Path, monkeypatch: pytest.MonkeyPatch, make: Callable[..., bytes], spoil: str
) -> None:
    monkeypatch.setattr(files, "TAIL", 2000)
    times = spaced(50)
    if spoil == "step":
        times[30:] = [time - 10**18 for time in times[30:]]
    capture = make(FRAMES, times)
    if spoil == "cut":
        capture = capture[:-7]
    if spoil == "noise":
        capture = capture[:-1000] + bytes(range(250)) * 2 + capture[-500:]
    if spoil == "section":
        capture += pcapng(FRAMES[:20], spaced(20, START_NS + 10**12))
    file = open_file(str(put(folder / "call", capture)))
    times_read = read(capture).times_ns
    assert file.span_ns() == (min(times_read), max(times_read))
    assert [one.link_type for one in file.interfaces][:1] == [1]


def test_a_long_sound_file_is_not_read_for_its_span(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(files, "TAIL", 2000)
    monkeypatch.setattr(files.CaptureFile, "batches", lambda *_: pytest.fail("the whole file was read"))
    for make in (pcap, pcapng):
        file = open_file(str(put(folder / "call", make(FRAMES))))
        assert file.span_ns() == (START_NS, START_NS + 49 * PACKET_TIME_NS)
