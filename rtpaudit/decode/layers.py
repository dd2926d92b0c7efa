"""What a frame's row carries while its headers are taken off, and the numbers of the layers that may come next.

Every row names in ``layer`` what stands at ``at``. Each module takes the rows whose layer is its own and moves them on,
until the layer is a packet, has to be treated aside, or is one of the reasons to leave the frame out.
"""

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

LayerTable = NDArray[np.uint8]
"""layer by EtherType or protocol number"""

ROW = np.dtype(
    [
        ("at", np.int64),  # address in memory of the first octet of ``layer``
        ("end", np.int64),  # where the layer ends by the lengths in the headers so far
        ("limit", np.int64),  # where the capture of this frame ends
        ("network_at", np.int64),  # innermost IP header, 0 until there is one
        ("vlan", np.uint16),
        ("ip_id", np.uint16),
        ("layer", np.uint8),
        ("protocol", np.uint8),
        ("dscp", np.uint8),
        ("ttl", np.uint8),
        ("kind", np.uint8),
        ("depth", np.uint8),  # headers and tunnels so far, to bound the nesting
    ],
    align=True,
)

Rows = NDArray[np.void]
"""array of ``ROW``"""


class Row(Protocol):
    """One row as kernels see it: a reference into the array."""

    at: int
    end: int
    limit: int
    network_at: int
    vlan: int
    ip_id: int
    layer: int
    protocol: int
    dscp: int
    ttl: int
    kind: int
    depth: int


# link.py
ETHERNET = 1
COOKED = 2
COOKED_2 = 3
LOOPBACK = 4
PPP = 5
PPPOE = 6
VLAN = 7
MPLS = 8
LLC = 9
BY_VERSION = 10
"""an IP header of the version that its first four bits say"""
LAST_LINK = 10

# network.py
IPV4 = 20
IPV6 = 21
EXTENSION_HEADER = 22
FRAGMENT_HEADER = 23
AUTHENTICATION_HEADER = 24

# transport.py
UDP = 30
TCP = 31
ICMP = 32

# tunnels.py
GRE = 40
VXLAN = 41
GENEVE = 42
GTP_U = 43

# treated aside, one by one
FRAGMENT = 50
RARE = 51

PACKET = 60
"""done: a row of ``Packets``"""

# left out
NOT_IP = 70
CUT = 71
MALFORMED = 72
OTHER_TRANSPORT = 73
UNKNOWN_LINK = 74
TOO_DEEP = 75
SLOW_PATH_FULL = 76
TOO_MANY_FLOWS = 77
LAYERS = 78

REASONS = {
    NOT_IP: "not IP",
    CUT: "headers cut by the snap length",
    MALFORMED: "malformed header",
    OTHER_TRANSPORT: "IP without UDP, TCP or ICMP",
    UNKNOWN_LINK: "unknown link type",
    TOO_DEEP: "too many headers inside each other",
    SLOW_PATH_FULL: "slow path exhausted",
    TOO_MANY_FLOWS: "too many flows",
}

MAX_DEPTH = 32
"""Headers of one frame, tunnels included. Common practice: real frames nest fewer than ten."""
