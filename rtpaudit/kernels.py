"""Compiled loops: one decorator, so that every kernel is cached between runs and frees the interpreter lock.

Importing this module imports numba; only modules that hold kernels do so.
"""

import sys
from collections.abc import Callable
from contextlib import suppress
from functools import cache
from pathlib import Path
from types import ModuleType
from typing import Any, TypeVar, cast

from numba import njit
from numba.core import event

F = TypeVar("F", bound=Callable[..., Any])


def kernel(function: F) -> F:
    """Compile a plain loop over arrays on its first call; later runs load it from the cache."""
    try:
        compiled = njit(cache=True, nogil=True, error_model="numpy")(function)
    except RuntimeError:
        # numba found no writable place for its cache (a read-only installation without a home): compile each run.
        return cast(F, njit(nogil=True, error_model="numpy")(function))
    # numba watches the kernel's own file alone; constants and parts from other files would stay what they were.
    file: Any = getattr(getattr(compiled, "_cache", None), "_cache_file", None)
    if hasattr(file, "_source_stamp"):
        file._source_stamp = file._source_stamp, _stamp(Path(function.__code__.co_filename).parent)
    return cast(F, compiled)


@cache
def _stamp(folder: Path) -> tuple[tuple[str, int, int], ...]:
    """Names, times and sizes of the modules in a kernel's folder, which is where it takes its parts from."""
    found = sorted((each.name, each.stat()) for each in folder.glob("*.py"))
    return tuple((name, status.st_mtime_ns, status.st_size) for name, status in found)


def on_first_compilation(announce: Callable[[], None]) -> None:
    """Call ``announce`` once, when the first kernel has to be compiled because the cache does not hold it."""
    said: list[bool] = []

    class Listener(event.Listener):
        def on_start(self, _event: Any) -> None:
            if not said:
                said.append(True)
                announce()

        def on_end(self, _event: Any) -> None:
            return

    event.register("numba:compile", Listener())  # type: ignore[no-untyped-call]


def inlined(function: F) -> F:
    """A small part of a kernel, compiled into each kernel that calls it and not on its own."""
    return cast(F, njit(nogil=True, error_model="numpy", forceinline=True)(function))


def load_without_extras() -> None:
    """Load the rest of numba without two packages that it looks for and no kernel uses; they take 0.2 s.

    numba loads that rest with the first kernel anyway, and gets along where the two are not installed. For a process
    of our own: elsewhere somebody may import them at the same moment.
    """
    absent = cast(ModuleType, None)
    extras = [name for name in ("scipy.linalg", "cffi") if name not in sys.modules]
    sys.modules.update(dict.fromkeys(extras, absent))
    try:
        with suppress(ImportError):
            import numba.core.typing.cffi_utils
            import numba.np.arraymath  # noqa: F401
    finally:
        for name in extras:
            del sys.modules[name]
