"""The catalogue: every rule complete, severity by points within the rule's own word."""

import pytest

from rtpaudit.findings import CATALOGUE
from rtpaudit.findings.rule import GROUPS, Rule, rule, severity_of

# The names that the tables promise, group by group.
# fmt: off
PROMISED = {
    "random-loss", "loss-burst", "periodic-loss", "delay-spike", "periodic-delay", "jitter-beyond-buffer",
    "buffer-shallow", "buffer-deep", "reordering", "duplicates", "marking-absent", "marking-changed",
    "route-change", "load", "policing", "loss-both-ways", "outage", "clock-skew", "packet-time-wrong",
    "packet-time-change", "sender-pacing", "sequence-fault", "timestamp-fault", "source-restart",
    "payload-type-not-agreed", "speech-start-clipped", "digits-twice", "rtcp-contradicts", "no-media",
    "one-way-media", "media-late", "setup-slow", "release-missing", "media-after-release", "hold-not-released",
    "encodings-differ", "second-transcoding", "level-low", "level-high", "level-unequal", "clipping", "noise",
    "hum", "dead-air", "wrong-law", "echo", "robbed-bits", "clock-slips", "capture-drops", "capture-one-way",
    "capture-doubled", "capture-cut", "capture-clock-step",
}
# fmt: on


def test_every_promised_finding_has_its_rule() -> None:
    assert set(CATALOGUE) >= PROMISED


@pytest.mark.parametrize("entry", CATALOGUE.values(), ids=lambda entry: entry.name)
def test_every_rule_has_a_whole_page(entry: Rule) -> None:
    assert entry.group in GROUPS
    assert entry.judge.__doc__
    for text in (entry.means, entry.check_next):
        assert text[0].isupper()
        assert text.endswith(".")
    for text in (entry.measured_as, entry.severity, entry.basis):
        assert text
        assert not text.endswith(".")


@pytest.mark.parametrize(
    ("points", "severity"),
    [(float("nan"), "remark"), (0.99, "remark"), (1.0, "concern"), (4.99, "concern"), (5.0, "fault"), (60.0, "fault")],
)
def test_severity_goes_by_points(points, severity) -> None:
    assert severity_of(points) == severity


def test_the_rules_own_word_bounds_severity_both_ways() -> None:
    assert severity_of(0.0, at_least="concern") == "concern"
    assert severity_of(60.0, at_most="concern") == "concern"


def test_two_rules_of_one_name_are_an_error() -> None:
    with pytest.raises(ValueError, match="two rules are called random-loss"):
        rule("random-loss", group="network", limit=0, unit="", basis="", means="", measured_as="", check_next="")


def test_a_rule_of_an_unknown_group_is_an_error() -> None:
    with pytest.raises(ValueError, match="no group 'weather'"):
        rule("rain", group="weather", limit=0, unit="", basis="", means="", measured_as="", check_next="")
