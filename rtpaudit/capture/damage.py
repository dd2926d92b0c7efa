"""Damage of one file, as it is met: bounded, so that a file of nothing but damage costs no more than another."""

from rtpaudit.capture.frames import Damage

MOST_ROWS = 100


def printable(text: str) -> str:
    """Text with everything that a terminal could act upon, or UTF-8 cannot hold, written as an escape."""
    return "".join(letter if letter.isprintable() else ascii(letter)[1:-1] for letter in text)


def octets_text(count: int) -> str:
    """``1 octet``, ``2 octets``."""
    return f"{count:,} octet" + "s" * (count != 1)


class DamageLog:
    """Rows of one file in the order met; past ``MOST_ROWS`` only their number is kept, in the last row."""

    def __init__(self, capture: str) -> None:
        self.capture = capture
        self.rows: list[Damage] = []
        self._further = 0

    def only_from(self, offset: int) -> bool:
        """Whether all that is damaged lies at ``offset`` or behind it."""
        return all(row.offset >= offset for row in self.rows)

    def add(self, offset: int, what: str, lost: str) -> None:
        """Note what was found at ``offset`` and what the audit does without."""
        if len(self.rows) < MOST_ROWS:
            self.rows.append(Damage(self.capture, offset, what, lost))
            return
        if self._further == 0:
            self._further_from = offset
            self.rows.append(Damage(self.capture, offset, what, lost))
        self._further += 1
        what = f"{self._further} more damaged places from here on"
        self.rows[-1] = Damage(self.capture, self._further_from, what, "not listed one by one")
