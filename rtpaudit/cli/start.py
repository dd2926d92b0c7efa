"""How a process of our own starts and ends: at once, readable everywhere, and in good order."""

import gc
import signal
import sys
from typing import Any, NoReturn

TERMINATED = 128 + signal.SIGTERM
"""exit status, as a shell counts a program that a signal ended"""

GARBAGE_AT_ONCE = 100_000


def start() -> None:
    """Ready the process: print any text on any terminal, unwind when told to end, and load without looking back."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    signal.signal(signal.SIGTERM, _terminate)
    # Modules stay for good, so looking for garbage among them while they load is a fifth of a short run.
    gc.disable()


def settle() -> None:
    """Look for garbage from now on, among what came after the modules."""
    if not gc.isenabled():
        gc.freeze()
        gc.set_threshold(GARBAGE_AT_ONCE)
        gc.enable()


def _terminate(_number: int, _frame: Any) -> NoReturn:
    raise SystemExit(TERMINATED)
