"""The command line: exit statuses, one line for what went wrong, never a traceback."""

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

from rtpaudit.cli import DEBUG, main
from rtpaudit.errors import UnreadableCapture, UnusableOutput, UnusableProfile
from tests.cli.conftest import Run


def command(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "rtpaudit", *arguments],
        capture_output=True,
        text=True,
        encoding="utf-8",
        env=os.environ | environment,
        check=False,
    )


def one_line(text: str) -> bool:
    return text.startswith("rtpaudit: ") and text.endswith("\n") and text.count("\n") == 1


@pytest.mark.parametrize(
    "arguments",
    [
        ["triage"],
        ["triag"],
        ["--nonsense"],
        ["triage", "a.pcap", "--nonsense"],
        ["triage", "a.pcap", "--out"],
        ["triage", "a.pcap", "--fail-below", "good"],
        ["triage", "a.pcap", "--fail-below", "101"],
        ["triage", "a.pcap", "--fail-below", "nan"],
        ["triage", "a.pcap", "--delay", "-1"],
        ["triage", "a.pcap", "--delay", "nan"],
        ["triage", "a.pcap", "--delay", "inf"],
        ["triage", "a.pcap", "--zone", "Nowhere/Atall"],
        ["triage", "a.pcap", "--zone", ""],
        ["triage", "a.pcap", "--zone", "../x"],
        ["triage", "a.pcap", "--payload-type", "96"],
        ["triage", "a.pcap", "--payload-type", "96=G722/8000", "--payload-type", "96=opus/48000"],
        ["triage", "a.pcap", "--profile", "missing.toml"],
        ["demo", "extra"],
        ["explain", "no_such_column"],
        ["explain", "jitter_ms", "loss_pct"],
    ],
    ids=" ".join,
)
def test_arguments_that_make_no_sense_are_one_line_and_status_2(arguments: list[str], run: Run) -> None:
    result = run(*arguments)
    assert result.status == 2
    assert result.out == ""
    assert one_line(result.err), result.err
    assert result.asked == [], "nothing was read"


@pytest.mark.parametrize(
    "fault",
    [
        UnreadableCapture("a.pcap: is empty; give a capture"),
        UnusableProfile("p.toml: unknown key x"),
        UnusableOutput("out: cannot be written"),
        OSError(28, "No space left on device", "spool"),
        MemoryError(),
        KeyError("stream"),
    ],
    ids=lambda fault: type(fault).__name__,
)
def test_whatever_goes_wrong_is_one_line_and_status_2(fault: Exception, run: Run) -> None:
    result = run("triage", "a.pcap", found=fault)
    assert result.status == 2
    assert one_line(result.err), result.err


def test_the_line_names_file_fault_and_remedy(run: Run) -> None:
    result = run("triage", "a.pcap", found=UnreadableCapture("a.pcap: is empty; give a capture"))
    assert result.err == "rtpaudit: a.pcap: is empty; give a capture\n"


def test_a_message_of_several_lines_or_with_escapes_stays_one_visible_line(run: Run) -> None:
    result = run("triage", "a.pcap", found=UnreadableCapture("a\nb\x1b[2J\u202e.pcap: is empty"))
    assert one_line(result.err)
    assert "\x1b" not in result.err
    assert "\u202e" not in result.err


def test_a_fault_of_our_own_shows_its_place_when_asked_for(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(DEBUG, "1")
    with pytest.raises(KeyError):
        run("triage", "a.pcap", found=KeyError("stream"))


def test_an_interruption_leaves_nothing_and_says_so(run: Run, tmp_path: Path) -> None:
    result = run("triage", "a.pcap", found=KeyboardInterrupt())
    assert result.status == 130
    assert one_line(result.err)
    assert list(tmp_path.iterdir()) == []


def test_help_and_version_are_no_faults(capsys: pytest.CaptureFixture[str]) -> None:
    assert main([]) == 0
    assert "triage" in capsys.readouterr().out
    assert main(["--help"]) == 0
    assert main(["triage", "--help"]) == 0
    assert "--fail-below" in capsys.readouterr().out
    assert main(["--version"]) == 0
    assert capsys.readouterr().out.startswith("rtpaudit 0.")


def test_help_loads_nothing_heavy() -> None:
    code = (
        "import sys\nfrom rtpaudit.cli import main\nmain(['--help'])\n"
        "print('LOADED', *{name.split('.')[0] for name in sys.modules})"
    )
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    loaded = set(shown.split("LOADED ")[1].split())
    assert not loaded & {"numpy", "pandas", "numba", "scipy", "pyarrow", "soundfile", "scapy", "rich"}


def test_the_module_runs_as_the_command_does() -> None:
    result = command("explain", "jitter_ms")
    assert result.returncode == 0
    assert "RFC 3550" in result.stdout


def test_a_bad_command_line_ends_the_process_with_2() -> None:
    result = command("triage", "/nonexistent/a.pcap", "--fail-below", "101")
    assert result.returncode == 2
    assert one_line(result.stderr)


def test_a_reader_that_goes_away_is_no_fault() -> None:
    process = subprocess.Popen(
        [sys.executable, "-m", "rtpaudit", "explain"], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    )
    assert process.stdout is not None
    process.stdout.close()
    _, said = process.communicate(timeout=60)
    assert said == b""
    assert process.returncode == 0


def test_any_text_can_be_shown_where_only_ascii_can() -> None:
    result = command("explain", "zz→ü", PYTHONIOENCODING="ascii")
    assert result.returncode == 2
    assert one_line(result.stderr)


def test_help_comes_at_once() -> None:
    """Loading the parser is all there is to do; a generous bound, so that a busy machine does not fail it."""
    begin = time.perf_counter()
    assert command("--help").returncode == 0
    assert time.perf_counter() - begin < 3.0
