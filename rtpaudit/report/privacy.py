"""What ``--private`` leaves out: parties, addresses, dialogs and file names become pseudonyms, digits go.

Text that came from outside and is no name, such as a reason phrase or the name of an encoding, is kept only where it is
a word that standards define. Within sentences of ours it stands in quotes, and they are emptied.

Pseudonyms are keyed: within one run the same party has the same one in all tables, and without the key, which is kept
nowhere, neither a list of all telephone numbers nor another run's report leads back to it.
"""

from __future__ import annotations

import base64
import hmac
import re
import secrets
from bisect import insort
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from ipaddress import ip_address
from typing import TYPE_CHECKING

from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.signalling.grammar import METHODS
from rtpaudit.signalling.h248 import COMMANDS
from rtpaudit.signalling.mgcp import VERBS
from rtpaudit.signalling.payload_types import REGISTERED

if TYPE_CHECKING:
    from pandas import DataFrame, Series

# Text columns that may tell who spoke with whom; all others hold only words of ours. "words" are sentences that may
# name one of the others, "standard" are words of standards unless somebody made up others, and what is "dropped" cannot
# be made harmless.
TREATMENT: dict[str, dict[str, str]] = {
    "calls": {"capture": "file", "call_id": "dialog", "caller": "party", "callee": "party", "encoding": "standard"},
    "streams": {
        "capture": "file",
        "source": "party",
        "destination": "party",
        "encoding": "standard",
        "rating_note": "words",
    },
    "findings": {"says": "words", "check_next": "words"},
    "signalling": {
        "from": "words",
        "to": "words",
        "message": "standard",
        "cseq": "standard",
        "line": "dropped",
        "call_id": "dialog",
        "capture": "file",
    },
    "events": {"digit": "dropped"},
    "reports": {"reporter": "party", "set_aside": "words"},
    "damage": {"capture": "file", "what": "words", "lost": "words"},
}

# Candidates only: what is no address to the standard library (a time of day, a version) stays as it is.
_ADDRESS = re.compile(
    r"(?<![\w.])\d{1,3}(?:\.\d{1,3}){3}(?!\w|\.\d)|(?<![\w:])[0-9A-Fa-f]*(?::[0-9A-Fa-f.]*){2,}[0-9A-Fa-f]"
)
_WORD = re.compile(r"[\w+][\w+.@-]*\w")
# What Python puts around text of others; the end may be cut off. An apostrophe behind a letter opens nothing.
_QUOTED = re.compile(r"""(?<!\w)(?:'(?:[^'\\]|\\.)*(?:'|\\?$)|"(?:[^"\\]|\\.)*(?:"|\\?$))""")
_STATUS = re.compile(r"[1-6]\d\d(?= |$)", re.ASCII)
_STANDARD_WORDS = METHODS | VERBS | REGISTERED | {"unknown", "Transaction", "Reply", *map(str.capitalize, COMMANDS)}
# A short number within a sentence is rather a figure than an extension.
_SHORTEST_NUMBER = 6


OTHER = "other"
"""in place of a word that no standard defines"""


def new_key() -> bytes:
    """A key that nobody knows; it is forgotten with the run."""
    return secrets.token_bytes(32)


class Pseudonyms:
    """Names that stand for others for as long as this object lives."""

    def __init__(self, key: bytes, captures: Sequence[str]) -> None:
        self._key = key
        self._files: dict[str, str] = {}
        self._known: dict[str, str] = {}
        self._odd: list[str] = []
        for name in captures:
            self.file(name)

    def tables(self, tables: Mapping[str, DataFrame]) -> dict[str, DataFrame]:
        """The tables with nothing in them that tells who spoke."""
        treated = {
            "file": self.file,
            "dialog": self.dialog,
            "party": self.party,
            "standard": self.standard,
            "words": self.words,
        }
        hidden = {name: frame.copy(deep=False) for name, frame in tables.items()}
        # Sentences last: what they may name has to be known by then.
        for kind in treated:
            for table, columns in TREATMENT.items():
                for column in [name for name, treatment in columns.items() if treatment == kind]:
                    hidden[table][column] = _replaced(hidden[table][column], treated[kind])
        for table, columns in TREATMENT.items():
            for column in [name for name, treatment in columns.items() if treatment == "dropped"]:
                hidden[table][column] = hidden[table][column].mask(hidden[table][column].notna())
        return hidden

    def calls(self, calls: Sequence[AssessedCall]) -> list[AssessedCall]:
        """Calls with nothing in their own texts that tells who spoke, once the tables are hidden."""

        def hidden(streams: Sequence[AssessedStream]) -> list[AssessedStream]:
            notes = (self.words(one.figures.rating_note) for one in streams)
            return [
                replace(one, figures=replace(one.figures, rating_note=note))
                for one, note in zip(streams, notes, strict=True)
            ]

        return [
            replace(
                call,
                capture=self.file(call.capture),
                call_id=self.dialog(call.call_id) if call.call_id else "",
                caller=self.party(call.caller),
                callee=self.party(call.callee),
                encoding=self.standard(call.encoding),
                from_caller=hidden(call.from_caller),
                from_callee=hidden(call.from_callee),
            )
            for call in calls
        ]

    def party(self, name: str) -> str:
        """Pseudonym of a number, name or address, the same for every way of writing an address."""
        try:
            return self._keyed("host", str(ip_address(name)))
        except ValueError:
            return self._remembered("party", name)

    def dialog(self, name: str) -> str:
        """Pseudonym of a Call-ID, which often holds an address."""
        return self._remembered("dialog", name)

    def file(self, name: str) -> str:
        """Number of a capture, as file names are often made of who complained."""
        if name not in self._files:
            self._files[name] = f"capture-{len(self._files) + 1}"
            self._learn(name, self._files[name])
        return self._files[name]

    def standard(self, text: str) -> str:
        """Words of standards, a status code without its phrase, and numbers; ``other`` in place of any other word."""
        if status := _STATUS.match(text):
            return status[0]
        return "".join(map(self._standard_word, re.split(r"([ /])", text)))

    def _standard_word(self, word: str) -> str:
        if word in _STANDARD_WORDS or word in ("", " ", "/") or (word.isascii() and word.isdigit()):
            return word
        self._known.setdefault(word, OTHER)
        return self._known[word]

    def words(self, text: str) -> str:
        """A sentence in which addresses, and names met before, are replaced, and quotations emptied."""
        text = _QUOTED.sub("'…'", text)
        for name in self._odd:
            text = text.replace(name, self._known[name])
        return _ADDRESS.sub(lambda found: self._address(found[0]), _WORD.sub(lambda found: self._word(found[0]), text))

    def _word(self, word: str) -> str:
        if word.isdigit() and len(word) < _SHORTEST_NUMBER:
            return word
        return self._known.get(word) or "@".join(self._known.get(part, part) for part in word.split("@"))

    def _address(self, text: str) -> str:
        try:
            return self._keyed("host", str(ip_address(text)))
        except ValueError:
            return text

    def _remembered(self, kind: str, name: str) -> str:
        if name not in self._known:
            self._learn(name, self._keyed(kind, name))
        return self._known[name]

    def _learn(self, name: str, pseudonym: str) -> None:
        self._known[name] = pseudonym
        # Names with spaces or signs are more than one word of a sentence; the longest first, as one may hold another.
        if len(name) > 2 and not _WORD.fullmatch(name):
            insort(self._odd, name, key=lambda one: -len(one))

    def _keyed(self, kind: str, name: str) -> str:
        digest = hmac.digest(self._key, name.encode("utf-8", "replace"), "sha256")
        return f"{kind}-{base64.b32encode(digest)[:8].decode().lower()}"


def _replaced(series: Series, change: Callable[[str], str]) -> Series:
    """The column with each distinct text changed once."""
    changed = {text: change(text) for text in series.dropna().unique()}
    return series.map(changed).astype("string")
