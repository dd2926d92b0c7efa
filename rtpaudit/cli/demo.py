"""Triage of the capture that ships with the package."""

from importlib.resources import as_file, files
from pathlib import Path

from rtpaudit.cli import options
from rtpaudit.cli.triage import triage


def demo(
    out: options.Out = None,
    zone: options.Zone = None,
    private: options.Private = False,
    single_file: options.SingleFile = False,
    quiet: options.Quiet = False,
    json: options.Json = False,
) -> int:
    """Run triage on a capture that ships with the package."""
    with as_file(files("rtpaudit") / "demo" / "demo.pcap") as capture:
        return triage(
            [str(capture)],
            out or Path("demo-audit"),
            zone=zone,
            private=private,
            single_file=single_file,
            quiet=quiet,
            json=json,
        )
