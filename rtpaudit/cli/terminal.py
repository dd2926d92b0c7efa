"""What reaches the terminal: text made safe, one line for what went wrong, and a bar for what takes long."""

import os
import shutil
import sys
import time
from types import TracebackType
from typing import Any

PATIENCE_S = 1.0
"""a bar shows from here on"""
WIDTHS = (60, 100)


def say(text: str) -> None:
    """Text on standard output. A reader that went away has read what it wanted, so that is no fault."""
    try:
        sys.stdout.write(text + "\n")
        sys.stdout.flush()
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def complain(text: str) -> None:
    """One line on standard error."""
    sys.stderr.write(f"rtpaudit: {visible(' '.join(text.split()))}\n")
    sys.stderr.flush()


def visible(text: str) -> str:
    """Text of strangers without what moves the cursor, changes colours or turns the direction of writing."""
    return "".join(sign if sign.isprintable() else "\ufffd" for sign in text)


def width() -> int:
    """Columns that a summary may take: those of the terminal within reason, 80 into a pipe."""
    if not sys.stdout.isatty():
        return 80
    return min(max(shutil.get_terminal_size((80, 24)).columns, WIDTHS[0]), WIDTHS[1])


def bold(text: str) -> str:
    """Text in bold where the terminal takes it."""
    plain = not sys.stdout.isatty() or "NO_COLOR" in os.environ or os.environ.get("TERM") == "dumb"
    return text if plain else f"\x1b[1m{text}\x1b[0m"


class Bar:
    """A bar on standard error while work goes on; none in short work, and none where nobody watches."""

    def __init__(self, shown: bool) -> None:
        self._shown = shown and sys.stderr.isatty()
        self._began = time.monotonic()
        self._progress: Any = None
        self._tasks: dict[str, Any] = {}

    def __enter__(self) -> "Bar":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._progress is not None:
            self._progress.stop()

    def reading(self, done: int, total: int) -> None:
        """Octets read so far, of those there are."""
        self._move("Reading", done, total)

    def writing(self, done: int, total: int) -> None:
        """Steps of writing that are done, of those there are."""
        self._move("Writing the report", done, total)

    def _move(self, what: str, done: int, total: int) -> None:
        if not self._shown or time.monotonic() - self._began < PATIENCE_S:
            return
        if self._progress is None:
            self._progress = _bar()
            self._progress.start()
        if what not in self._tasks:
            self._tasks[what] = self._progress.add_task(what, total=total)
        self._progress.update(self._tasks[what], completed=done)


def _bar() -> Any:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TaskProgressColumn(), TimeRemainingColumn())
    return Progress(*columns, console=Console(stderr=True), transient=True)
