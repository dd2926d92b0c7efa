"""The house in order: docstrings, types, size, who may print, catch, ask the clock or reach out, and what may not leak.

Each complaint names file and line, and says what to do.
"""

import ast
import re
from collections.abc import Iterator

import pytest

from tests.sources import PACKAGE, ROOT, Import, Source, package_imports, package_sources
from tests.test_rooms import BENCHES

MOST_LINES = 400
TABLES_OF_DATA = {f"{PACKAGE}.columns"}
# Benches' modules that measure nothing themselves.
PLUMBING = {f"{PACKAGE}.metrics.arrays", f"{PACKAGE}.metrics.network"}

# Who may write to the terminal, catch anything at all, and ask the clock, chance, the environment or the network.
PRINTERS = {"cli"}
LAST_DOORS = {"cli", "nightly"}
OUTWARD = {"cli", "nightly"}
# The key of a run's pseudonyms must not be foreseen, and nobody else needs it.
PERMITTED_CHANCE = {(f"{PACKAGE}.report.privacy", "secrets")}
# Noise that is the same on every run: the seed is handed in.
SEEDED = {f"{PACKAGE}.codecs.comfort_noise"}
# It keeps scapy from laying out folders in the user's home.
SETS_THE_ENVIRONMENT = {f"{PACKAGE}.decode.rare"}
CHANCE_AND_CLOCK = {
    "random",
    "secrets",
    "uuid",
    "time",
    "socket",
    "ssl",
    "http",
    "urllib",
    "requests",
    "ftplib",
    "smtplib",
}
CLOCK_CALLS = {
    "time.time",
    "datetime.now",
    "datetime.utcnow",
    "datetime.today",
    "date.today",
    "os.getenv",
    "os.urandom",
}

Function = ast.FunctionDef | ast.AsyncFunctionDef

# Written so that this file does not hold what it looks for.
LEAKS = re.compile(
    r"(?<![\w.])/(?:work|root|home)/\w|/tmp/(?:venv|brief|bash)|"
    + r"|".join(
        [r"pypi\s*\.org", r"pythonhosted\s*\.org", r"registry\.npm", r"deb\.debian", r"proxy\.golang", r"crates\.io"]
    )
)
UNFINISHED = re.compile(r"\b(?:TO" + r"DO|FIX" + r"ME|XX" + r"X)\b")
WRITTEN_BY_US = {".py", ".md", ".toml", ".csv", ".json", ".html", ".css", ".js", ".txt", ".cfg", ".sh", ""}


def everywhere(find) -> list[str]:
    return [said for source in package_sources() for said in find(source)]


def report(complaints: list[str]) -> str:
    return "\n" + "\n".join(complaints)


def functions(source: Source) -> Iterator[Function]:
    yield from (node for node in ast.walk(source.tree) if isinstance(node, Function))


def public(source: Source) -> Iterator[Function | ast.ClassDef]:
    """Classes, functions and methods that others may use, which their names say."""
    for node in source.tree.body:
        if isinstance(node, Function | ast.ClassDef) and not node.name.startswith("_"):
            yield node
            if isinstance(node, ast.ClassDef):
                yield from (each for each in node.body if isinstance(each, Function) and not each.name.startswith("_"))


def overloaded(node: Function | ast.ClassDef) -> bool:
    return any("overload" in ast.unparse(each) or ".setter" in ast.unparse(each) for each in node.decorator_list)


def test_every_module_and_every_public_thing_says_what_it_is() -> None:
    def silent(source: Source) -> Iterator[str]:
        if source.text.strip() and not ast.get_docstring(source.tree):
            yield f"{source.at(source.tree)}: the module has no docstring"
        for node in public(source):
            if not ast.get_docstring(node) and not overloaded(node):
                yield f"{source.at(node)}: {node.name} has no docstring"

    complaints = everywhere(silent)
    assert not complaints, report(complaints)


def test_what_a_bench_function_tells_of_its_arguments_it_tells_of_all() -> None:
    """A short function may say all in its first line; one that lists its parameters lists each."""

    def incomplete(source: Source) -> Iterator[str]:
        for node in source.tree.body if source.room in BENCHES else []:
            text = (ast.get_docstring(node) or "") if isinstance(node, Function) else ""
            if not isinstance(node, Function) or node.name.startswith("_") or "Parameters\n---" not in text:
                continue
            wanted = [each.arg for each in [*node.args.args, *node.args.kwonlyargs] if not each.arg.startswith("_")]
            lines = re.findall(r"(?m)^([\w*]+(?:, [\w*]+)*)(?: : .*)?$", text)
            missing = [name for name in wanted if name not in {each for line in lines for each in line.split(", ")}]
            if missing:
                yield f"{source.at(node)}: the docstring of {node.name} says nothing of {', '.join(missing)}"

    complaints = everywhere(incomplete)
    assert not complaints, report(complaints)


def test_every_bench_module_names_its_sources() -> None:
    """Somewhere it says which Recommendation, RFC, paper or practice it follows, or that the idea is our own."""
    told = re.compile(r"ITU-T|RFC \d|common practice|our own|References\n", re.IGNORECASE)
    silent = [
        f"{source.at(source.tree)}: no source named: a Recommendation, an RFC, common practice, or our own"
        for source in package_sources()
        if source.room in BENCHES and source.module not in PLUMBING and any(functions(source))
        if not told.search(source.text)
    ]
    assert not silent, report(silent)


def test_everything_is_typed() -> None:
    def untyped(source: Source) -> Iterator[str]:
        for node in functions(source):
            arguments = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
            arguments += [each for each in (node.args.vararg, node.args.kwarg) if each]
            bare = [each.arg for each in arguments if each.annotation is None and each.arg not in ("self", "cls")]
            if bare or node.returns is None:
                yield f"{source.at(node)}: {node.name} has no type for {', '.join(bare) or 'what it returns'}"

    complaints = everywhere(untyped)
    assert not complaints, report(complaints)


def test_no_module_is_too_long() -> None:
    long = [
        f"{source.at(source.tree)}: {source.text.count(chr(10))} lines, at most {MOST_LINES}: split it by its questions"
        for source in package_sources()
        if source.text.count("\n") > MOST_LINES and source.module not in TABLES_OF_DATA
    ]
    assert not long, report(long)


def test_only_the_command_line_prints() -> None:
    def printing(source: Source) -> Iterator[str]:
        if source.room in PRINTERS:
            return
        for node in ast.walk(source.tree):
            if isinstance(node, ast.Call) and ast.unparse(node.func) == "print":
                yield f"{source.at(node)}: prints; hand the text to cli"
            if isinstance(node, ast.Attribute) and ast.unparse(node) in ("sys.stdout", "sys.stderr"):
                yield f"{source.at(node)}: uses {ast.unparse(node)}; hand the text to cli"

    complaints = everywhere(printing)
    assert not complaints, report(complaints)


def test_nothing_is_caught_broadly_but_at_the_last_doors() -> None:
    def broad(source: Source) -> Iterator[str]:
        if source.room in LAST_DOORS:
            return
        for node in ast.walk(source.tree):
            if isinstance(node, ast.ExceptHandler):
                names = ast.unparse(node.type) if node.type else "everything"
                passed_on = isinstance(node.body[-1], ast.Raise) and node.body[-1].exc is None
                if re.search(r"\b(everything|Exception|BaseException)\b", names) and not passed_on:
                    yield f"{source.at(node)}: catches {names}; name what may really come"

    complaints = everywhere(broad)
    assert not complaints, report(complaints)


def test_clock_chance_environment_and_network_stay_outside() -> None:
    def imports(found: Import) -> str:
        top = found.target.split(".")[0]
        permitted = found.source.room in OUTWARD or (found.source.module, top) in PERMITTED_CHANCE
        if top in CHANCE_AND_CLOCK and not permitted:
            return f"{found.source.at(found.node)}: imports {top}; let cli or nightly ask and hand the answer in"
        return ""

    def calls(source: Source) -> Iterator[str]:
        if source.room in OUTWARD or source.module in SETS_THE_ENVIRONMENT | SEEDED:
            return
        for node in ast.walk(source.tree):
            name = ast.unparse(node) if isinstance(node, ast.Attribute) else ""
            if name == "os.environ" or name.endswith(tuple(CLOCK_CALLS)) or name.startswith("np.random."):
                yield f"{source.at(node)}: uses {name}; let cli or nightly ask and hand the answer in"

    complaints = [said for said in map(imports, package_imports()) if said] + everywhere(calls)
    assert not complaints, report(complaints)


def our_files() -> list:
    tops = [PACKAGE, "tests", "docs", "fixtures", ".ci"]
    paths = (
        [path for top in tops for path in (ROOT / top).rglob("*")] + list(ROOT.glob("*.md")) + [ROOT / "pyproject.toml"]
    )
    return [
        path for path in paths if path.is_file() and path.suffix in WRITTEN_BY_US and "__pycache__" not in path.parts
    ]


def lines_with(pattern: re.Pattern[str]) -> list[str]:
    return [
        f"{path.relative_to(ROOT)}:{number}: {found[0]}"
        for path in our_files()
        for number, line in enumerate(path.read_text("utf-8", errors="replace").splitlines(), start=1)
        if (found := pattern.search(line))
    ]


def test_no_file_names_a_place_on_somebodys_machine_or_a_registry() -> None:
    complaints = lines_with(LEAKS)
    assert not complaints, report(complaints)


def test_nothing_is_left_unfinished() -> None:
    complaints = [said for said in lines_with(UNFINISHED) if said.startswith((PACKAGE, "tests", ".ci"))]
    assert not complaints, report(complaints)


@pytest.mark.parametrize(
    "text", ["/ro" + "ot/x", "see /wo" + "rk/main", "https://py" + "pi.org/simple", "/ho" + "me/ann"]
)
def test_the_search_for_leaks_finds_them(text) -> None:
    assert LEAKS.search(text)


@pytest.mark.parametrize("text", ["net/work/load", "a clock, a network and a workshop", "docs/home/"])
def test_the_search_for_leaks_lets_words_pass(text) -> None:
    assert not LEAKS.search(text)


def test_the_licence_is_there_in_full() -> None:
    text = (ROOT / "LICENSE").read_text("utf-8")
    assert "GNU GENERAL PUBLIC LICENSE" in text
    assert "Version 2, June 1991" in text
    assert "END OF TERMS AND CONDITIONS" in text
