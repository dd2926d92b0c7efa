"""Big-endian numbers read out of memory inside kernels. Whoever calls has checked the bounds.

Kernels that look at headers go by addresses in memory and not by the octet array: for an array, numba counts references
around every inner call and tests every index for being negative, which together cost more than the headers do.
"""

import sys
from collections.abc import Callable
from typing import Any, cast

from llvmlite import ir
from numba.core import types
from numba.extending import intrinsic

from rtpaudit.capture.frames import Octets

Address = int
"""address in memory; in kernels an int64"""


def _reader(bits: int) -> Callable[[Address], int]:
    """What reads a number of so many bits from an address; 64 bits come as uint64, fewer as int64."""
    result = types.uint64 if bits == 64 else types.int64

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        number = ir.IntType(bits)
        value = builder.load(builder.inttoptr(arguments[0], number.as_pointer()), align=1)
        if sys.byteorder == "little" and bits > 8:
            value = builder.bswap(value)
        return builder.zext(value, ir.IntType(64)) if bits < 64 else value

    def typed(_typing: Any, _address: Any) -> Any:
        return result(types.int64), generate

    return cast(Callable[[Address], int], intrinsic(typed))


u8 = _reader(8)
u16 = _reader(16)
u32 = _reader(32)
u64 = _reader(64)


def address(octets: Octets) -> Address:
    """Where the first octet lies; good as long as the caller holds the array, which is contiguous."""
    return int(octets.ctypes.data)
