"""The command line: its parser, its exit status, and the only place that prints."""

import os
import signal
import sys
from collections.abc import Sequence
from typing import Annotated, Any

import typer

from rtpaudit import __version__
from rtpaudit.cli import demo, explain, listen, nightly, triage
from rtpaudit.cli.start import start
from rtpaudit.cli.terminal import complain, say
from rtpaudit.errors import RtpAuditError

DONE, LIMIT_BROKEN, UNUSABLE = 0, 1, 2
INTERRUPTED = 128 + signal.SIGINT
"""as a shell counts a program that a signal ended"""

DEBUG = "RTPAUDIT_DEBUG"

app = typer.Typer(
    help="Finds which call in a packet capture sounded bad, which way, how bad and why.",
    rich_markup_mode=None,
    add_completion=False,
    pretty_exceptions_enable=False,
)
app.command("triage")(triage.triage)
app.command("nightly")(nightly.nightly)
app.command("listen")(listen.listen)
app.command("demo")(demo.demo)
app.command("explain")(explain.explain)


@app.callback(invoke_without_command=True)
def _rtpaudit(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="Show the version.")] = False,
) -> None:
    if version:
        say(f"rtpaudit {__version__}")
        raise typer.Exit
    if context.invoked_subcommand is None:
        say(context.get_help())


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command line; the exit status: 0 done, 1 done but a limit of the user's is broken, 2 unusable input."""
    if arguments is None:
        start()
        arguments = sys.argv[1:]
    try:
        status: Any = app(args=list(arguments), prog_name="rtpaudit", standalone_mode=False)
        # The parser turns an interruption into this number.
        if status == INTERRUPTED:
            raise KeyboardInterrupt
        return status or DONE
    except RtpAuditError as fault:
        complain(str(fault))
    except typer.TyperException as fault:
        complain(f"{fault.format_message().rstrip('.')}; see rtpaudit --help")
    except (KeyboardInterrupt, typer.Abort):
        complain("interrupted; no report was written")
        return INTERRUPTED
    except MemoryError:
        complain("not enough memory for this capture; cut it into pieces, or close other programs")
    except OSError as fault:
        complain(f"{fault.filename or 'the system'}: {fault.strerror or fault}")
    # The last door: whatever it is, nobody has to read a traceback who did not ask for one.
    except Exception as fault:
        if os.environ.get(DEBUG):
            raise
        complain(
            f"a fault of rtpaudit itself: {type(fault).__name__}: {fault}; set {DEBUG}=1 to see where, and report it"
        )
    return UNUSABLE
