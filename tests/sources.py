"""The package's own source files, parsed once, for the tests that hold the house in order."""

import ast
from dataclasses import dataclass
from functools import cache
from pathlib import Path

ROOT = Path(__file__).parents[1]
PACKAGE = "rtpaudit"


def room_of(module: str) -> str:
    """First name under the package, "" for the package itself."""
    return module.removeprefix(PACKAGE).removeprefix(".").split(".")[0]


@dataclass(frozen=True)
class Source:
    path: Path
    module: str
    """dotted name, a package by its own name"""
    text: str
    tree: ast.Module

    @property
    def room(self) -> str:
        return room_of(self.module)

    def at(self, node: ast.AST) -> str:
        return f"{self.path.relative_to(ROOT)}:{getattr(node, 'lineno', 1)}"


@dataclass(frozen=True)
class Import:
    source: Source
    node: ast.Import | ast.ImportFrom
    target: str
    """dotted name of the module that is imported"""
    at_head: bool
    """runs as soon as the file is imported"""
    for_types: bool
    """under ``if TYPE_CHECKING``"""


@cache
def package_sources() -> tuple[Source, ...]:
    return tuple(_parsed(path) for path in sorted((ROOT / PACKAGE).rglob("*.py")))


def _parsed(path: Path) -> Source:
    parts = path.relative_to(ROOT).with_suffix("").parts
    text = path.read_text("utf-8")
    return Source(path, ".".join(parts).removesuffix(".__init__"), text, ast.parse(text))


@cache
def package_imports() -> tuple[Import, ...]:
    modules = {source.module for source in package_sources()}
    return tuple(found for source in package_sources() for found in imports_of(source, modules))


def imports_of(source: Source, modules: set[str]) -> list[Import]:
    """All imports of a file, wherever they stand; ``from package import module`` counts as that module."""
    return _imports(source, source.tree, modules, at_head=True, for_types=False)


def _imports(source: Source, node: ast.AST, modules: set[str], *, at_head: bool, for_types: bool) -> list[Import]:
    found: list[Import] = []
    for child in ast.iter_child_nodes(node):
        inside = isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
        typing = isinstance(child, ast.If) and ast.unparse(child.test).endswith("TYPE_CHECKING")
        if isinstance(child, ast.Import):
            found += [Import(source, child, name.name, at_head, for_types) for name in child.names]
        elif isinstance(child, ast.ImportFrom):
            base = "." * child.level + (child.module or "")
            for name in child.names:
                inner = f"{base}.{name.name}"
                found.append(Import(source, child, inner if inner in modules else base, at_head, for_types))
        found += _imports(source, child, modules, at_head=at_head and not inside, for_types=for_types or typing)
    return found
