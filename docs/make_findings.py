"""Writes docs/findings.md out of the catalogue of findings, the same words as in `rtpaudit explain`."""

import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
sys.path.insert(0, str(ROOT))

from rtpaudit.findings import CATALOGUE  # noqa: E402
from rtpaudit.findings.rule import CONCERN_POINTS, FAULT_POINTS, GROUPS, Rule  # noqa: E402

INTRODUCTION = f"""\
# Findings

<!-- Made by docs/make_findings.py: edit the rules in rtpaudit/findings/ and run it again. -->

A finding is a cause with its evidence. `rtpaudit explain NAME` tells the same as this page. A profile moves a limit
(`[limits]`, by name of finding, in its unit); `basis` then says so.

- **Severity.** Where the rating sees the cause: a remark below {CONCERN_POINTS:g} point of R, a concern from there,
  a fault from {FAULT_POINTS:g} points. Where it does not, the rule's own word. The headline of a call is its gravest
  finding above a remark.
- **What a cause takes** (`r_points`) is the rating without it less the rating. Each cause claims the lost and late
  packets that it explains. Those that explain most surely come first and leave to the others what they are not sure
  of; where two explain the same packet as well, each has a share, and shares never add up to more than the packet.
  Where G.113 has no values for an encoding, causes are weighed as G.711 would suffer from them, and no points shown.
- **Where** is as much as one capture point can know: packets missing in the capture were lost before it, packets that
  only the far receiver (RTCP) misses were lost after it. A fault of the capture is never blamed on the network.
- **Confidence** says how sure the finding is; where two causes explain the same evidence, both stand, and the sentence
  for the next step says what would tell.

How often the headline is right is measured on captures with a known fault: [faultbench.md](faultbench.md).
"""


def document() -> str:
    """The whole text."""
    parts = [f"## {group.capitalize()}\n" + "".join(map(page, of_group(group))) for group in GROUPS]
    return "\n".join([INTRODUCTION, *parts])


def of_group(group: str) -> list[Rule]:
    """Rules of a group by name."""
    return sorted((one for one in CATALOGUE.values() if one.group == group), key=lambda one: one.name)


def page(rule: Rule) -> str:
    """One finding."""
    limit = f"{rule.limit:g} {rule.unit}".rstrip()
    lines = [
        f"\n### {rule.name}\n",
        f"{rule.means}\n",
        f"- Measured as {rule.measured_as}.",
        f"- Limit: {limit} ({rule.basis}).",
        f"- Severity: {rule.severity}.",
        f"- Next: {rule.check_next}",
    ]
    return "\n".join(lines) + "\n"


if __name__ == "__main__":
    (ROOT / "docs" / "findings.md").write_text(document(), "utf-8")
