"""Writes docs/pesq.md, the predictions of the audit beside PESQ: ``python -m tests.evidence.table``, some minutes."""

import tempfile
from collections.abc import Sequence
from pathlib import Path

from tests.evidence.conditions import (
    PATTERNS,
    Condition,
    Judged,
    conditions,
    correlation,
    judge,
    root_mean_square_error,
)

DOCUMENT = Path(__file__).parents[2] / "docs" / "pesq.md"
DRAWS, DRAWS_IN_SILENCE = 20, 10
SILENT_PATTERNS, SILENT_RATES_PCT = ("random", "bursts of ratio 2"), (1.0, 3.0, 5.0, 10.0, 20.0)
APART_MOS = 0.35
SHOWN_APART = 8

INTRODUCTION = """\
# Does the rating mean something? Prediction beside PESQ

<!-- Made by: python -m tests.evidence.table (needs the extra pesq, and a C compiler to install it). -->

A person reads aloud for 12 s (`fixtures/audio/reader.wav`). The recording is sent as PCMU, packets are lost on
purpose, or come too late, and the capture goes through the audit like any other. Two judgements of the same call are
set side by side:

- **predicted**: `mos_cqe` of the audit (ITU-T G.107, with Ie and Bpl of G.113 Appendix I). The profile sets Ta, T and
  Tr to 0: PESQ cannot hear delay.
- **PESQ**: ITU-T P.862 with the mapping of P.862.1, between the recording and `-heard`, the audio after playout
  buffer and concealment (G.711 Appendix I). PESQ was withdrawn in 01/2024 and is no listener either: a second
  opinion, made by other means from other data. The prediction sees packets only, PESQ samples only.

Patterns: packets missing *at random*; in *bursts* whose runs are 2 or 4 times as long as by chance (BurstR of G.107,
which calls ratios up to 2 validated); at random and not lost but *too late* for the playout buffer. Each row is the
mean of {draws} draws; *spread* is the standard deviation of PESQ from draw to draw, which tells how much it matters
where in the speech the same loss falls. *Error* is predicted less PESQ.
"""

MEANING = """\
## Where the two part

{worst}

- **Bursts.** The prediction counts packets and their runs; which sounds fell out it does not know, PESQ does. The
  spread of PESQ in these rows is of the size of the error.
- **Packet time.** Of the same loss 20 ms packets cost more than 10 ms packets, as concealment bridges 10 ms well and
  fades from there on. PESQ hears that. The prediction does not: the Bpl of G.113 for G.711 was found with 10 ms
  packets, and stands for all.
- **Little loss and much.** PESQ is the stricter judge of a few holes. With 10 ms packets that turns round at about 10
  to 15 %.
- **No concealment** (last table). At 5 to 10 % loss Bpl 4.3 gives 1.0 to 2.2, PESQ about a whole point more. The order
  of the conditions stays right, the figures do not agree. Where a receiver plays silence for lost packets, read the
  rating as a rank.

One voice of 12 s is little: what holds here over many conditions need not hold for a single call.
"""


def document(judged: Sequence[Judged], silent: Sequence[Judged]) -> str:
    """The whole text."""
    return "\n".join(
        [
            INTRODUCTION.format(draws=DRAWS),
            "## Result\n",
            summary(judged),
            MEANING.format(worst=worst(judged)),
            "## Every condition, losses concealed\n",
            table(judged),
            "## The same with silence in place of what is missing\n",
            f"Mean of {DRAWS_IN_SILENCE} draws.\n",
            summary(silent),
            table(silent),
        ]
    )


def summary(judged: Sequence[Judged]) -> str:
    """Correlation and error over all conditions and over parts of them."""
    parts = {"all": list(judged)}
    patterns = dict.fromkeys(one.condition.pattern for one in judged if one.condition.loss_pct)
    parts |= {pattern: [one for one in judged if one.condition.pattern == pattern] for pattern in patterns}
    parts |= {f"{ms} ms packets": [one for one in judged if one.condition.packet_ms == ms] for ms in (10, 20)}
    lines = ["| conditions | number | correlation | error (RMS) |", "| --- | ---: | ---: | ---: |"]
    lines += [
        f"| {name} | {len(part)} | {correlation(part):.3f} | {root_mean_square_error(part):.2f} |"
        for name, part in parts.items()
    ]
    return "\n".join(lines) + "\n"


def worst(judged: Sequence[Judged]) -> str:
    """Where prediction and PESQ differ most, in two sentences."""
    apart = sorted(judged, key=lambda one: -abs(one.error))[:SHOWN_APART]
    beyond = sum(abs(one.error) > APART_MOS for one in judged)
    told = ", ".join(f"{name_of(one.condition)}: {signed(one.error)}" for one in apart[:3])
    bursts = sum(PATTERNS.get(one.condition.pattern, 1.0) > 1.0 for one in apart)
    return (
        f"{beyond} of {len(judged)} conditions are more than {APART_MOS} MOS apart, farthest {told}. "
        f"{bursts} of the {SHOWN_APART} that are farthest apart are bursts."
    )


def name_of(condition: Condition) -> str:
    """A condition in words."""
    return f"{condition.loss_pct:g} % {condition.pattern}, {condition.packet_ms} ms"


def signed(value: float) -> str:
    """A difference with its sign."""
    return f"{value:+.2f}".replace("-", "−")


def table(judged: Sequence[Judged]) -> str:
    """One row per condition."""
    lines = [
        "| pattern | packets | loss | missing | predicted | PESQ | spread | error |",
        "| --- | ---: | ---: | ---: | ---: | ---: | ---: | ---: |",
    ]
    return "\n".join(lines + [row(one) for one in judged]) + "\n"


def row(one: Judged) -> str:
    """The row of a condition."""
    which = one.condition
    cells = [which.pattern, f"{which.packet_ms} ms", f"{which.loss_pct:g} %", f"{one.missing_pct:.1f} %"]
    cells += [f"{value:.2f}" for value in (one.predicted, one.pesq, one.spread)]
    return f"| {' | '.join(cells)} | {signed(one.error)} |"


def main() -> None:
    """Judge all conditions and write the document."""
    with tempfile.TemporaryDirectory() as place:
        judged = [judge(one, DRAWS, Path(place)) for one in conditions()]
        silent = [
            judge(one, DRAWS_IN_SILENCE, Path(place))
            for one in conditions(SILENT_PATTERNS, SILENT_RATES_PCT, conceals=False)
        ]
    DOCUMENT.write_text(document(judged, silent), "utf-8")
    print(summary(judged))


if __name__ == "__main__":
    main()
