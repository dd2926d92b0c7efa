"""A listening check of four clips that three people rated."""

from pathlib import Path
from typing import Any

from rtpaudit.listen.key import KeyRow, key_lines

VOTES = {"Ann": [1, 3, 4, 5], "Ben": [2, 3, 4, 4], "Cleo": [1, 2, 5, 5]}
PREDICTED = [1.5, 2.5, 4.0, 4.4]
HOSTILE = "<script>alert(1)</script>"


def row(clip: str = "clip-01", **changed: Any) -> KeyRow:
    """A row of a key."""
    facts: dict[str, Any] = {
        "check": "c0ffee",
        "clip": clip,
        "kind": "worst",
        "reason": "loss-burst",
        "call": "c01",
        "stream": "s01",
        "capture": "complaint.pcap",
        "speaker": "caller",
        "started": "2026-03-03T10:42:10.910002Z",
        "from_s": 8.45,
        "duration_s": 9.5,
        "encoding": "PCMU",
        "sampling_rate_hz": 8000,
        "packets_expected": 475,
        "packets_lost": 12,
        "packets_discarded": 3,
        "burst_ratio": 2.5,
        "r_factor": 61.5,
        "predicted_mos": 3.2,
        "level_before_dbov": -30.0,
        "level_dbov": -26.0,
        "gain_db": 4.0,
        "limited_db": 0.0,
    }
    return KeyRow(**facts | changed)


def write_key(path: Path, *rows: KeyRow) -> Path:
    """A key as a file."""
    path.write_text("\n".join([*key_lines(rows), ""]), "utf-8")
    return path


def write_check(place: Path) -> list[Path]:
    """A key and the files of its listeners; the last clip is an anchor."""
    clips = [f"clip-0{k}" for k in range(1, 5)]
    kinds = ["worst", "worst", "worst", "anchor"]
    rows = [row(clip, predicted_mos=mos, kind=kind) for clip, mos, kind in zip(clips, PREDICTED, kinds, strict=True)]
    write_key(place / "key.csv", *rows)
    for name, votes in VOTES.items():
        lines = ["check,listener,session,clip,vote,comment,rated_at"]
        lines += [
            f'c0ffee,{name},{name},{clip},{vote},"{HOSTILE}",2026' for clip, vote in zip(clips, votes, strict=True)
        ]
        (place / f"{name}.csv").write_text("\n".join(lines), "utf-8")
    return [place / f"{name}.csv" for name in VOTES]
