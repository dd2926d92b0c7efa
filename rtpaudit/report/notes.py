"""The notes behind terms and figures of the page: what it is, how it is known, and the published source."""

from typing import Any

from rtpaudit.columns import TABLES, Column
from rtpaudit.findings.rule import CATALOGUE
from rtpaudit.report.ears import STEP_NOTES, STEP_WORDS

# Media facts in the order in which they are read, each with the words of the page. A figure's largest value does not
# stand beside its mean: the tape draws both over time.
MEDIA_FACTS: dict[str, dict[str, str]] = {
    "Stream": {
        "source": "From", "source_port": "From port", "destination": "To", "destination_port": "To port",
        "ssrc": "SSRC", "encoding": "Encoding", "payload_type": "Payload type", "clock_basis": "Clock known by",
        "match_basis": "Joined to the call by", "packet_time_ms": "Packet time", "duration_s": "Length",
        "segments": "Segments", "dscp": "Marking (DSCP)", "encrypted": "Encrypted",
    },
    "Network": {
        "packets_expected": "Packets expected", "packets_lost": "Packets lost", "loss_pct": "Loss",
        "sequence_gaps": "Gaps", "packets_recovered": "Brought back by redundancy",
        "packets_duplicated": "Duplicates", "packets_reordered": "Overtaken", "jitter_ms": "Jitter, mean",
        "pdv_p95_ms": "Delay variation, 95 %", "clock_skew_ppm": "Clock skew",
    },
    "Receiver": {
        "playout_delay_ms": "Playout delay", "packets_discarded": "Packets too late", "discard_pct": "Too late",
        "burst_ratio": "Burst ratio", "burst_density_pct": "Loss within bursts",
        "burst_duration_ms": "Length of bursts",
    },
    "Reports of the far end": {
        "reported_loss_pct": "Loss it reports", "reported_jitter_ms": "Jitter it reports",
        "round_trip_ms": "Round trip", "loss_before_pct": "Lost before this point",
        "loss_after_pct": "Lost after this point",
    },
    "Rating": {
        "one_way_delay_ms": "Mouth to ear", "delay_basis": "Delay known by", "ie_eff": "Ie,eff", "r_factor": "R",
        "r_factor_low": "R, were the network slow", "r_factor_high": "R, were the network quick",
        "mos_cqe": "MOS, estimated", "quality_band": "In words", "rating_note": "Note",
    },
    "Sound": {
        "speech_level_dbov": "Speech level", "activity_pct": "Speech", "noise_level_dbov": "Noise level",
        "clipped_pct": "Clipped",
    },
}  # fmt: skip

TERMS = {
    "playout deadline": "When a packet must have arrived to be played: beyond it the receiver plays on without it. "
    "From the simulated playout buffer of the profile. Source: RFC 3611, 4.7.1 and 4.7.7.",
    "delay": "Delay of each packet beyond the smallest of its stream, the sender’s clock skew taken out. Source: RFC "
    "5481, 4.2.",
    "rating": "Transmission rating R for every two seconds, by loss and lateness of these two seconds. Source: ITU-T "
    "G.107 (06/2015), 7.1.",
    "lost": "Sequence numbers that never came, where their sound is missing. Source: RFC 3550, A.3.",
    "sound": "The wave as this ear heard it, after playout buffer and concealment, both ears on one scale; soft sounds "
    "are drawn larger than they are. Passages of speech are shaded. Source: ITU-T P.56, method B.",
}


def notes() -> dict[str, Any]:
    """All notes of the page, by what they are about."""
    return {
        "facts": [
            {"group": group, "rows": [_fact(name, words) for name, words in columns.items()]}
            for group, columns in MEDIA_FACTS.items()
        ],
        "terms": TERMS,
        "steps": {name: {"words": STEP_WORDS.get(name, name), "note": note} for name, note in STEP_NOTES.items()},
        "findings": {
            name: {
                "means": rule.means,
                "measured_as": rule.measured_as,
                "limit": rule.limit,
                "unit": rule.unit,
                "basis": rule.basis,
                "severity": rule.severity,
            }
            for name, rule in CATALOGUE.items()
        },
    }


def _fact(name: str, words: str) -> dict[str, str]:
    column = _COLUMNS[name]
    return {
        "name": name,
        "words": words,
        "kind": column.kind,
        "unit": column.unit,
        "note": f"{column.meaning} Source: {column.source}.",
    }


_COLUMNS: dict[str, Column] = {column.name: column for column in TABLES["streams"]}
