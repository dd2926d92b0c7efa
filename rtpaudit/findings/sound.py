"""Rules about how a direction sounds: its level, noise, hum, clipping, silence, and echo."""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from rtpaudit.assess.hearing import StreamSound
from rtpaudit.audio.echo import Echo
from rtpaudit.audio.level import SILENCE_DBOV, dbm0
from rtpaudit.emodel.g107 import rating
from rtpaudit.findings.agreed import suppresses_silence
from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, Evidence, rule
from rtpaudit.findings.words import ms, number, pct
from rtpaudit.planning import PARAMETERS

LEAST_SPEECH_DBOV = -62.0
LEAST_SPEECH_S = 2.0
ABOVE_NOISE_DB = 12.0
"""what is softer than that above the noise is no speech whose level could be told"""
FAR_BELOW_DB = 28.0
"""noise that far below the speech is turned down with it (common practice)"""
FLAT_NOISE_DB = 2.5
"""by which the weighting of a telephone lowers flat noise. ITU-T O.41, from memory"""
SURE_ECHO_PCT, INAUDIBLE_ECHO_DB = 70.0, 46.0
"""loss that an echo canceller leaves at least. ITU-T G.168, from memory"""
SURE_PCT = 60.0
FLOOR_TENTHS, FLOOR_SHARES, FLOOR_RATIO = 50, (3.0, 15.0), 10.0**0.4
"""tenths of a second, percentiles of their power, and what lies between these at most where there is noise below"""


@rule(
    "level-low", group="sound", limit=-42.0, unit="dBov", basis=COMMON_PRACTICE,
    means="Speech was so soft that the listener had to strain, or turn up the noise with it.",
    measured_as="active speech level (ITU-T P.56, method B); the usual level is -26 dBov",
    check_next="Look at the gain of that side's microphone, headset or gateway; a loss plan may be applied twice.",
    severity="a concern, a fault 8 dB below the limit",
)  # fmt: skip
def level_low(case: Case, limit: float) -> Iterator[Evidence]:
    """Speech too soft."""
    for facts, level in _speech_levels(case):
        if level >= limit:
            continue
        yield Evidence(
            measured=level,
            says=f"The {case.talker(facts)} is too soft: its speech has {number(level)} dBov where -26 is usual.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=85.0,
            at_least="fault" if level < limit - 8 else "concern",
            gravity=20.0 + limit - level,
        )


@rule(
    "level-high", group="sound", limit=-14.0, unit="dBov", basis=COMMON_PRACTICE,
    means="Speech was uncomfortably loud; peaks may be cut off further on, and echo returns louder.",
    measured_as="active speech level (ITU-T P.56, method B); the usual level is -26 dBov",
    check_next="Look at the gain of that side's microphone, headset or gateway.",
    severity="a concern",
)  # fmt: skip
def level_high(case: Case, limit: float) -> Iterator[Evidence]:
    """Speech too loud."""
    for facts, level in _speech_levels(case):
        if level <= limit:
            continue
        yield Evidence(
            measured=level,
            says=f"The {case.talker(facts)} is too loud: its speech has {number(level)} dBov where -26 is usual.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=85.0,
            at_least="concern",
            at_most="concern",
            gravity=10.0,
        )


@rule(
    "level-unequal", group="sound", limit=12.0, unit="dB", basis=COMMON_PRACTICE,
    means="One side is much louder than the other: who hears the soft side turns up, and is then startled.",
    measured_as="difference of the active speech levels of both directions (ITU-T P.56, method B)",
    check_next="Compare the gains of both telephones and of the gateways between; the softer side is the likelier one.",
    severity="a concern",
)  # fmt: skip
def level_unequal(case: Case, limit: float) -> Iterator[Evidence]:
    """One side much louder than the other."""
    levels = _speech_levels(case)
    one = [level for facts, level in levels if facts in case.from_caller]
    other = [level for facts, level in levels if facts in case.from_callee]
    if not one or not other:
        return
    difference = max(one) - max(other)
    if abs(difference) < limit:
        return
    loud, soft = ("caller", "callee") if difference > 0 else ("callee", "caller")
    yield Evidence(
        measured=abs(difference),
        says=f"The {loud} is {number(abs(difference))} dB louder than the {soft} ({number(max(one))} and "
        f"{number(max(other))} dBov).",
        where=ENDPOINT,
        confidence_pct=85.0,
        at_least="concern",
        at_most="concern",
        gravity=10.0 + abs(difference) - limit,
    )


@rule(
    "clipping", group="sound", limit=0.1, unit="%", basis=COMMON_PRACTICE,
    means="Peaks of the speech are cut off, which sounds harsh and rough: a gain before or in the encoder is too high.",
    measured_as="share of samples in runs of two and more at the extremes of the code, or at a ceiling below them "
    "at which many soft and loud passages peak alike",
    check_next="Lower the gain of that side's microphone or gateway.",
    severity="a concern, a fault from ten times the limit",
)  # fmt: skip
def clipping(case: Case, limit: float) -> Iterator[Evidence]:
    """Peaks cut off."""
    for facts, sound in sounds_of(case):
        found = sound.clipping
        ceiling = found.at_ceiling_pct if found.confidence_pct >= SURE_PCT else 0.0
        share = max(np.nan_to_num(found.clipped_pct), ceiling)
        if not share >= limit:
            continue
        below = ceiling > found.clipped_pct
        where = f"at a ceiling of {number(found.ceiling_dbov)} dBov" if below else "at the extremes of the code"
        yield Evidence(
            measured=share,
            says=f"Peaks in the speech of the {case.talker(facts)} are cut off {where} ({pct(share)} of the "
            "samples): it sounds harsh.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=found.confidence_pct if ceiling > found.clipped_pct else 95.0,
            at_least="fault" if share >= 10 * limit else "concern",
            gravity=30.0 + min(share, 20.0),
        )


@rule(
    "noise", group="sound", limit=-48.0, unit="dBov", basis=COMMON_PRACTICE,
    means="There is a loud noise in the pauses of the speech: a noisy room, a bad microphone, or a bad analogue line.",
    measured_as="level in the pauses of the speech, where it is less than 28 dB below the speech; what it takes "
    "from the rating is reckoned as circuit noise Nc (ITU-T G.107)",
    check_next="Ask for the room of that side first, then look at its headset, handset cord and analogue line.",
    severity="by what it takes from the rating as circuit noise; at least a concern",
)  # fmt: skip
def noise(case: Case, limit: float) -> Iterator[Evidence]:
    """Noise in the pauses."""
    for facts, sound in sounds_of(case):
        level = sound.noise_dbov
        hum_level = sound.hum.level_dbov if sound.hum is not None else -np.inf
        # Speech all along, and music, have no pauses that could be told.
        distance = sound.level.active_dbov - level
        hums = hum_level > level - 3.0
        if not level > limit or not distance < FAR_BELOW_DB or hums or suppresses_silence(facts):
            continue
        if not _has_steady_floor(sound):
            continue
        yield Evidence(
            measured=level,
            says=f"There is a noise of {number(level)} dBov in the pauses of the {case.talker(facts)}, where a quiet "
            "line has -60 and less.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=80.0,
            r_points=_noise_points(facts, level),
            hidden_points=not facts.rated.known,
            at_least="concern",
        )


@rule(
    "hum", group="sound", limit=-55.0, unit="dBov", basis=COMMON_PRACTICE,
    means="The mains hums in the sound, at 50 or 60 Hz and its multiples: a ground loop, a bad power supply, or an "
    "analogue line beside a power line.",
    measured_as="level of the lines at multiples of the mains frequency that stay through speech and pauses",
    check_next="Try another power supply and outlet at that side, then look at the grounding of its analogue gear.",
    severity="a concern, a fault from 15 dB over the limit",
)  # fmt: skip
def hum(case: Case, limit: float) -> Iterator[Evidence]:
    """Mains hum."""
    for facts, sound in sounds_of(case):
        found = sound.hum
        if found is None or found.level_dbov <= limit or found.confidence_pct < SURE_PCT:
            continue
        yield Evidence(
            measured=found.level_dbov,
            says=f"The mains hums in the sound of the {case.talker(facts)}: multiples of {found.mains_hz} Hz with "
            f"{number(found.level_dbov)} dBov, strongest at {found.strongest_hz} Hz.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=found.confidence_pct,
            at_least="fault" if found.level_dbov > limit + 15 else "concern",
            gravity=25.0 + found.level_dbov - limit,
        )


@rule(
    "echo", group="sound", limit=25.0, unit="ms", basis="ITU-T G.131, from memory of its delay limit",
    means="A side hears its own speech again, later and softer: the other side's telephone, headset or hybrid lets "
    "it through, and nothing cancels it.",
    measured_as="delay and loss of what comes back in the other direction while one side speaks, at the capture "
    "point; what it takes from the rating is reckoned by TELR (ITU-T G.107)",
    check_next="Look at the far side's loudspeaker and handset first, then at the echo canceller of the gateway "
    "next to it.",
)  # fmt: skip
def echo(case: Case, limit: float) -> Iterator[Evidence]:
    """A side that hears itself."""
    sound = case.call.sound
    if sound is None:
        return
    for hears, found, streams in (
        ("caller", sound.echo_to_caller, case.from_callee),
        ("callee", sound.echo_to_callee, case.from_caller),
    ):
        if found is None or found.delay_ms < limit or not streams or not _is_heard(found):
            continue
        facts = max(streams, key=lambda one: len(one.packets))
        points = _echo_points(facts, found)
        yield Evidence(
            measured=found.delay_ms,
            says=f"The {hears} hears itself again after {ms(found.delay_ms)} (at the capture point), "
            f"{number(found.loss_db)} dB softer.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=found.confidence_pct,
            r_points=points,
            hidden_points=not facts.rated.known,
            at_least="concern" if found.loss_db < 30.0 else "remark",
        )


def sounds_of(case: Case) -> list[tuple[StreamFacts, StreamSound]]:
    """Streams of a call whose sound was measured."""
    return [(facts, facts.assessed.sound) for facts in case.streams if facts.assessed.sound is not None]


def _speech_levels(case: Case) -> list[tuple[StreamFacts, float]]:
    """Active speech level of each stream that holds speech well above its noise. [dBov]"""
    found = []
    for facts, sound in sounds_of(case):
        level = sound.level.active_dbov
        spoken_s = sound.level.activity_pct / 100.0 * sound.scanned.samples / sound.rate_hz
        above = level - (SILENCE_DBOV if np.isnan(sound.noise_dbov) else sound.noise_dbov)
        if (
            level > LEAST_SPEECH_DBOV
            and spoken_s >= LEAST_SPEECH_S
            and above >= ABOVE_NOISE_DB
            and not sound.steady_tones
        ):
            found.append((facts, level))
    return found


def _has_steady_floor(sound: StreamSound) -> bool:
    """Whether the softest parts of a stream are alike, as noise is: soft speech and music are not."""
    scanned = sound.scanned
    power = scanned.power()[scanned.received > 0]
    tenths = power[: len(power) // 10 * 10].reshape(-1, 10).mean(axis=1)
    if len(tenths) < FLOOR_TENTHS:
        return False
    low, high = np.percentile(tenths, FLOOR_SHARES)
    return bool(high <= low * FLOOR_RATIO)


def _noise_points(facts: StreamFacts, level_dbov: float) -> float:
    """What a noise takes from the rating as circuit noise at the 0 dBr point (ITU-T G.107, 7.2)."""
    row = PARAMETERS["Nc"]
    found = dbm0(level_dbov, facts.stream.encoding)
    Nc = float(np.clip((level_dbov + 6.2 if np.isnan(found) else found) - FLAT_NOISE_DB, row.low, row.high))
    quiet = facts.profile.planning
    delay = facts.rated.delay_ms
    return float(rating(quiet, Ta=delay).R - rating(replace(quiet, Nc=max(Nc, quiet.Nc)), Ta=delay).R)


def _is_heard(found: Echo) -> bool:
    """Whether an echo is sure, and loud enough to be one that somebody complains of."""
    return found.confidence_pct >= SURE_ECHO_PCT and found.loss_db < INAUDIBLE_ECHO_DB


def _echo_points(facts: StreamFacts, found: Echo) -> float:
    """What an echo takes from the rating of who hears it (ITU-T G.107, 7.4)."""
    planning, figures = facts.profile.planning, facts.assessed.figures
    telr = planning.SLR + planning.RLR + found.loss_db
    loss = 0.0 if np.isnan(figures.loss_pct) else figures.loss_pct
    without = facts.rated.R(loss, figures.burst_ratio, telr_db=PARAMETERS["TELR"].default)
    return without - facts.rated.R(loss, figures.burst_ratio, telr_db=telr)
