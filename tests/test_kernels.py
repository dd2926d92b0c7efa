"""Kernels come from the cache, and never from a stale one."""

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
KERNEL = """
from room.limits import LIMIT
from rtpaudit.kernels import kernel, on_first_compilation

on_first_compilation(lambda: print("compiling"))

@kernel
def limited(number):
    return min(number, LIMIT)

print(limited(1000))
"""


def run(folder: Path) -> list[str]:
    program = f"import sys; sys.path[:0] = [{str(folder)!r}, {str(ROOT)!r}]; import room.kernel"
    done = subprocess.run([sys.executable, "-c", program], check=True, capture_output=True, text=True, cwd=folder)
    return done.stdout.split()


def test_a_constant_changed_in_a_neighbouring_module_compiles_the_kernel_anew(tmp_path: Path) -> None:
    room = tmp_path / "room"
    room.mkdir()
    (room / "__init__.py").touch()
    (room / "kernel.py").write_text(KERNEL)
    (room / "limits.py").write_text("LIMIT = 7\n")
    assert run(tmp_path) == ["compiling", "7"]
    assert run(tmp_path) == ["7"]
    (room / "limits.py").write_text("LIMIT = 11\n")
    assert run(tmp_path) == ["compiling", "11"]
