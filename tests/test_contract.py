"""What users may rely on: commands, options, exit status, files and columns, listed here as they were promised."""

import subprocess
import sys
from pathlib import Path

import pandas as pd
import pytest

from rtpaudit import errors
from rtpaudit.cli import DONE, LIMIT_BROKEN, UNUSABLE, main
from rtpaudit.columns import TABLES
from rtpaudit.report.folder import write_folder
from tests.report import made

COMMANDS = {"triage", "nightly", "listen", "demo", "explain"}
TRIAGE_OPTIONS = {
    "--out", "--payload-type", "--delay", "--profile", "--zone", "--private", "--digits", "--quiet", "--json",
    "--fail-below", "--party", "--at", "--call", "--near", "--excerpt", "--single-file", "--figures-only",
}  # fmt: skip
LISTEN_OPTIONS = {
    "--out", "--payload-type", "--delay", "--profile", "--zone", "--private", "--digits", "--quiet", "--json",
    "--ratings", "--key", "--clips", "--seed",
}  # fmt: skip

COLUMNS = {
    "streams": """
        stream call capture source source_port destination destination_port ssrc payload_type encoding clock_rate_hz
        sampling_rate_hz packet_time_ms clock_basis match_basis started ended duration_s segments packets_captured
        packets_received packets_expected packets_lost loss_pct packets_duplicated packets_reordered packets_recovered
        sequence_gaps longest_gap_packets jitter_ms jitter_max_ms jitter_last_ms pdv_p50_ms pdv_p95_ms pdv_p99_ms
        pdv_max_ms clock_skew_ppm dscp playout_delay_ms packets_discarded discard_pct burst_ratio burst_density_pct
        burst_duration_ms gap_density_pct gap_duration_ms reported_loss_pct reported_jitter_ms round_trip_ms
        loss_before_pct loss_after_pct one_way_delay_ms delay_basis ie_eff r_factor mos_cqe r_factor_low r_factor_high
        rating_note quality_band speech_level_dbov activity_pct noise_level_dbov clipped_pct encrypted
    """,
    "calls": """
        call conversation capture call_id caller callee started answered ended duration_s outcome status_code
        setup_delay_s release_by streams encoding caller_hears_r callee_hears_r r_factor mos_cqe quality_band loss_pct
        jitter_ms one_way_delay_ms headline
    """,
    "gaps": "stream first_missing packets_missing at duration_ms after_s",
    "windows": """
        stream from_s packets_expected packets_lost packets_discarded loss_pct jitter_ms pdv_p95_ms r_factor
        activity_pct level_dbov
    """,
    "findings": """
        finding call stream severity r_points from_s to_s where measured limit unit basis confidence_pct says
        check_next
    """,
    "damage": "capture offset what lost",
}
TEXT = """
    stream call capture source destination ssrc encoding clock_basis match_basis delay_basis rating_note quality_band
    conversation call_id caller callee outcome release_by headline finding severity where unit basis says check_next
    what lost
"""
COUNTS = """
    source_port destination_port payload_type clock_rate_hz sampling_rate_hz segments packets_captured packets_received
    packets_expected packets_lost packets_duplicated packets_reordered packets_recovered sequence_gaps
    longest_gap_packets packets_discarded dscp streams status_code first_missing packets_missing offset
"""
DTYPES = {"text": "string", "count": "Int64", "number": "float64", "time": "datetime64[ns, UTC]", "yes_no": "boolean"}
TIMES = ["started", "ended", "answered", "at"]
UNITS = ("_ms", "_s", "_hz", "_pct", "_ppm", "_packets", "_dbov", "_dbm0", "_db")
WITHOUT_UNIT = {
    "burst_ratio", "ie_eff", "r_factor", "mos_cqe", "r_factor_low", "r_factor_high", "caller_hears_r",
    "callee_hears_r", "r_points", "measured", "limit",
}  # fmt: skip


def shown(*arguments: str) -> set[str]:
    """Words of a help page."""
    result = subprocess.run([sys.executable, "-m", "rtpaudit", *arguments], capture_output=True, text=True, check=True)
    return set(result.stdout.split())


def test_the_commands_are_those_promised() -> None:
    page = subprocess.run([sys.executable, "-m", "rtpaudit", "--help"], capture_output=True, text=True, check=True)
    listed = page.stdout.split("Commands:\n")[1].splitlines()
    assert {line.split()[0] for line in listed if line[2:3].strip()} == COMMANDS


@pytest.mark.parametrize(("command", "options"), [("triage", TRIAGE_OPTIONS), ("listen", LISTEN_OPTIONS)])
def test_a_command_has_the_options_promised_and_no_others(command: str, options: set[str]) -> None:
    assert {word for word in shown(command, "--help") if word.startswith("--")} - {"--help"} == options


def test_exit_status_is_0_1_or_2() -> None:
    assert (DONE, LIMIT_BROKEN, UNUSABLE) == (0, 1, 2)


def test_every_error_is_one_of_the_tree() -> None:
    ours = [one for one in vars(errors).values() if isinstance(one, type) and issubclass(one, Exception)]
    assert all(issubclass(one, errors.RtpAuditError) for one in ours)


@pytest.mark.parametrize("table", COLUMNS)
def test_columns_are_those_promised_in_their_order(table: str) -> None:
    assert [column.name for column in TABLES[table]] == COLUMNS[table].split()


def test_messages_events_and_reports_are_tables_too() -> None:
    assert set(TABLES) == set(COLUMNS) | {"signalling", "events", "reports"}


@pytest.mark.parametrize("table", COLUMNS)
def test_kinds_are_those_promised(table: str) -> None:
    for column in TABLES[table]:
        if column.name == "encrypted":
            assert column.kind == "yes_no"
        elif column.name in TIMES:
            assert column.kind == "time"
        else:
            expected = "text" if column.name in TEXT.split() else "count" if column.name in COUNTS.split() else "number"
            assert column.kind == expected, column.name


@pytest.mark.parametrize("table", TABLES)
def test_a_number_carries_its_unit_in_its_name(table: str) -> None:
    for column in TABLES[table]:
        if column.kind == "number" and column.name not in WITHOUT_UNIT | {"mos_lq", "mos_cq"}:
            assert column.name.endswith(UNITS), column.name


def test_the_folder_holds_the_files_promised(tmp_path: Path) -> None:
    write_folder(made.Audited(), tmp_path / "out")
    files = {str(path.relative_to(tmp_path / "out")) for path in (tmp_path / "out").rglob("*") if path.is_file()}
    tables = ["calls", "streams", "gaps", "windows", "findings", "signalling", "events", "reports", "damage"]
    promised = {f"{table}.{kind}" for table in tables for kind in ("csv", "parquet")} | {"audit.json", "index.html"}
    sound = {"audio/c01.wav", "audio/c01-s01-sent.wav", "audio/c01-s02-sent.wav", "audio/c01-s01-heard.wav"}
    assert promised <= files
    assert sound <= files
    assert all(file in promised or file.startswith("audio/") for file in files)


def test_tables_read_back_with_the_kinds_promised(tmp_path: Path) -> None:
    write_folder(made.Audited(), tmp_path / "out", audio=False)
    for table, columns in TABLES.items():
        frame = pd.read_parquet(tmp_path / "out" / f"{table}.parquet")
        assert isinstance(frame.index, pd.RangeIndex)
        assert [str(dtype) for dtype in frame.dtypes] == [DTYPES[column.kind] for column in columns]


def test_the_folder_is_named_after_the_capture_by_default() -> None:
    from rtpaudit.cli.options import folder_for

    assert folder_for(["complaint.pcap"]).name == "complaint-audit"


def test_explain_knows_every_column(capsys: pytest.CaptureFixture[str]) -> None:
    for name in {column.name for columns in TABLES.values() for column in columns}:
        assert main(["explain", name]) == 0
        assert name in capsys.readouterr().out
