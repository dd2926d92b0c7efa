"""The decode room: ``Frames`` come in, ``Packets`` and the ``Flows`` they belong to go out.

Most rows go through the compiled path at once (path.py). What it leaves aside follows one by one: frames that only
scapy can read (rare.py) and IP fragments (fragments.py). tcp.py and icmp.py read further in the rows of their kind.
"""

from rtpaudit.capture.frames import Damage, Frames
from rtpaudit.decode.packets import Flows, Kind, Packets

__all__ = ["Decoder", "Flows", "Kind", "Packets"]


class Decoder:
    """The way from frames to packets for one recording.

    Attributes
    ----------
    damage : list of Damage
        What could not be read, complete after ``finish``.
    skipped : dict of str to int
        Frames that are no packet of UDP, TCP or ICMP, by reason.
    """

    def __init__(self, note_fragments: bool = False) -> None:
        from rtpaudit.decode.path import Path  # compiled kernels: numba takes a while to import

        self._path = Path()
        if note_fragments:
            self._path.fragments.brought = {}

    @property
    def flows(self) -> Flows:
        """Distinct (protocol, addresses, ports) seen so far, in order of their first packet."""
        return self._path.flows()

    @property
    def damage(self) -> list[Damage]:
        """What could not be read so far."""
        return self._path.damage

    @property
    def skipped(self) -> dict[str, int]:
        """Frames that carry no UDP, TCP or ICMP packet, by reason."""
        return self._path.skipped()

    def frames_of(self, capture: str, frame: int) -> list[tuple[str, int]]:
        """Capture and number of all frames that brought what a frame completed; known where fragments are noted."""
        found, left = {(capture, frame)}, [(capture, frame)]
        while left:
            # Fragments of a datagram that itself came in fragments bear the number of its last one.
            more = set((self._path.fragments.brought or {}).get(left.pop(), ())) - found
            found |= more
            left += more
        return sorted(found)

    def decode(self, frames: Frames, capture: str) -> list[Packets]:
        """Packets of a batch of the file ``capture``; datagrams put together from fragments are a batch apart."""
        return self._path.decode(frames, capture)

    def finish(self) -> list[Packets]:
        """What was held back until now; afterwards ``damage`` is complete."""
        return self._path.finish()
