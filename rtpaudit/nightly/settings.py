"""What one run is set to: frozen values that go to the workers as they are."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from rtpaudit.profile import Profile

if TYPE_CHECKING:
    from rtpaudit.signalling.payload_types import Encoding

NAMES_KEPT, NAMES_KEYED, PRIVATE = "kept", "keyed", "private"


@dataclass(frozen=True, slots=True)
class AuditSettings:
    """How each capture is audited, wherever that is done."""

    profile: Profile = field(default_factory=Profile)
    payload_types: "Mapping[int, Encoding]" = field(default_factory=dict)
    delay_ms: float | None = None
    zone: str | None = None
    """IANA name; the machine's own where left out"""
    names: str = NAMES_KEYED
    """``kept``, ``keyed`` (parties are pseudonyms) or ``private`` (addresses too)"""
    sound: bool = False
    """whether the sound is decoded and measured too, which takes ten times as long"""
    digits: bool = False
    """whether pressed digits are kept"""
    key: bytes = field(default=b"", repr=False)
    """of the pseudonyms"""
    profile_mark: str = ""
    memory_octets: int | None = None
    """what one worker may take for itself; None for no limit"""
