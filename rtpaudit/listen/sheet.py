"""rating-sheet.html: one clip at a time, rated by keyboard on the scale of ITU-T P.800, without any network."""

from collections.abc import Sequence

from rtpaudit import __version__
from rtpaudit.listen.templating import environment, own
from rtpaudit.report import shell

SHEET = "rating-sheet.html"
SCALE = {5: "Excellent", 4: "Good", 3: "Fair", 2: "Poor", 1: "Bad"}
"""Absolute category rating of listening quality. ITU-T P.800, annex B, from memory"""

CAUTIONS = (
    (
        "Consent and law",
        "The clips are recordings of telephone calls. Listening to them without the consent of those who spoke, or "
        "another legal ground, is an offence in most places. Listen only if whoever gave you this sheet has settled "
        "that.",
    ),
    (
        "Confidence",
        "Tell nobody what you hear, make no copies, and let nobody listen along. If you know a voice, leave its clip "
        "out.",
    ),
    ("Retention", "Delete this folder, and the file that you saved, once your ratings are handed in."),
    (
        "Hearing",
        "All clips have one level, and peaks are limited; how loud that is decides your machine. The sheet starts "
        "quietly each time. Turn the volume up on the first clip until speech is comfortable, then leave it as it is. "
        "Stop if anything hurts.",
    ),
)

SECONDS_TO_DECIDE = 8.0
LISTENINGS = 1.5
"""how often a clip is heard on the average: only for the time that the sheet announces"""


def rating_sheet(check: str, names: Sequence[str], folder: str, durations_s: Sequence[float]) -> str:
    """The sheet as a text.

    Parameters
    ----------
    check : str
        Id of the listening check.
    names : sequence of str
        Names of the clips; each listener hears them in an order of their own.
    folder : str
        Where their files are, beside the sheet.
    durations_s : sequence of float
        [s]
    """
    from markupsafe import Markup

    script = f'(() => {{\n"use strict";\n{own("rating-sheet.js")}}})();\n'
    data = {
        "check": check,
        "clips": [{"name": name, "file": f"{folder}/{name}.wav"} for name in names],
        "scale": SCALE,
    }
    minutes = max(1, round(sum(LISTENINGS * one + SECONDS_TO_DECIDE for one in durations_s) / 60.0))
    template = environment().get_template(SHEET)
    return template.render(
        policy=shell.policy([script]),
        stylesheet=Markup(shell.stylesheet() + own("rating-sheet.css")),
        script=Markup(script),
        check=Markup(shell.as_json(data)),
        clips=f"{len(names)} clip{'s' if len(names) != 1 else ''}",
        count=len(names),
        minutes=f"some {minutes} minute{'s' if minutes != 1 else ''}",
        scale=list(SCALE.items()),
        cautions=CAUTIONS,
        version=__version__,
    )
