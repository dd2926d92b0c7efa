"""Runs the whole bench and writes docs/faultbench.md: ``python -m tests.faultbench [--seeds N] [--keep FOLDER]``."""

import argparse
from collections import Counter, defaultdict
from collections.abc import Callable, Iterable
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from pathlib import Path

from tests.faultbench.bench import CONTROLS, KINDS, Verdict, bench, control, make
from tests.sources import ROOT

TARGET = ROOT / "docs" / "faultbench.md"

INTRODUCTION = """\
# Fault bench

<!-- Made by python -m tests.faultbench: run it again after a change to the rules or the bench. -->

Captures with a known fault, made by seed from real speech, and clean controls beside them. Each draws anew what no rule
may key on: addresses (both versions), ports, SSRCs, numbers, times, encodings, packet times, link and file types,
distances and routers, clock skew of up to 60 ppm, ways of silence suppression, whether there is signalling and RTCP,
length (12 to 60 s), levels and room noise, and whether good calls stand beside it. A kind with a slash is a variant.

The speech is that of `fixtures/audio` (a person reading, and two synthetic voices). The bench shows that rules tell
apart what it makes; it says nothing about how often each fault occurs, nor about calls with several of them.
"""


def table(verdicts: Iterable[Verdict]) -> str:
    """Cause against top finding."""
    by_kind: dict[str, list[Verdict]] = defaultdict(list)
    for one in verdicts:
        by_kind[one.kind].append(one)
    lines = ["| cause | captures | right | top finding where it was another |", "| --- | ---: | ---: | --- |"]
    for kind in sorted(by_kind):
        of_kind = by_kind[kind]
        wrong = Counter(one.top or "none" for one in of_kind if not one.right)
        told = ", ".join(f"{name} ({count})" if count > 1 else name for name, count in wrong.most_common())
        lines.append(f"| {kind} | {len(of_kind)} | {sum(one.right for one in of_kind)} | {told} |")
    return "\n".join(lines)


def share(verdicts: list[Verdict]) -> str:
    """How many are right."""
    right = sum(one.right for one in verdicts)
    return f"{right} of {len(verdicts)} ({100 * right / len(verdicts):.1f} %)"


def document(faults: list[Verdict], controls: list[Verdict], seeds: int) -> str:
    """The whole text."""
    kinds = {one.kind for one in faults}
    capture_faults = [one for one in faults if one.kind.startswith("capture-")]
    beside = [one for one in faults if not one.kind.startswith("capture-") and one.others]
    clean = [one for one in controls if not any(each.severity != "remark" for each in one.findings)]
    alarms = [f"- {one.kind}: {one.top or ', '.join(one.others)}" for one in controls if one not in clean or one.others]
    return "\n".join(
        [
            INTRODUCTION,
            f"Headline right: {share(faults)}, over {len(kinds)} kinds of {seeds} seeds.",
            f"Clean controls without any finding above a remark: {len(clean)} of {len(controls)}.",
            f"Good calls beside a faulty one that got a headline too: in {len(beside)} of "
            f"{len(faults) - len(capture_faults)} captures (faults of the capture itself left out: they touch all).",
            "",
            *(["False alarms on clean controls:", "", *alarms, ""] if alarms else []),
            table(faults),
            "",
        ]
    )


def run(job: Callable[[int], Verdict], seeds: int) -> list[Verdict]:
    """A kind, or a control, for all its seeds."""
    return [job(seed) for seed in range(seeds)]


def main() -> None:
    """The command."""
    parser = argparse.ArgumentParser(prog="python -m tests.faultbench", description=__doc__)
    parser.add_argument("--seeds", type=int, default=10, help="captures of each kind (10)")
    parser.add_argument("--control-seeds", type=int, default=2, help="clean controls of each sort (2)")
    parser.add_argument(
        "--kind", action="append", help="only this kind, or the variants of this finding; writes nothing"
    )
    parser.add_argument("--keep", type=Path, help="write the captures of the kinds into this folder, and judge nothing")
    given = parser.parse_args()
    chosen = [name for name in KINDS if not given.kind or name in given.kind or name.split("/")[0] in given.kind]
    if given.keep:
        given.keep.mkdir(parents=True, exist_ok=True)
        for name in chosen:
            for seed in range(given.seeds):
                (given.keep / f"{name.replace('/', '-')}.{seed}.cap").write_bytes(make(KINDS[name], seed).octets)
        return
    with ProcessPoolExecutor() as pool:
        faults = [pool.submit(run, partial(bench, name), given.seeds) for name in chosen]
        controls = [] if given.kind else [
            pool.submit(run, partial(control, number), given.control_seeds) for number in range(len(CONTROLS))
        ]  # fmt: skip
        faulty = [one for job in faults for one in job.result()]
        clean = [one for job in controls for one in job.result()]
    if given.kind:
        print(table(faulty))
    else:
        TARGET.write_text(document(faulty, clean, given.seeds), "utf-8")


if __name__ == "__main__":
    main()
