"""What the digitiser makes of volts, and how its codes are laid out on the wire."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Codes = NDArray[np.int8] | NDArray[np.int16]


def quantise(volts: NDArray[np.float32], full_scale_v: float, offset_v: float, bits: int) -> Codes:
    """Signed codes, shape as `volts`: code 0 is `offset_v`, one code is `full_scale_v / 2**bits`.

    The range spans `full_scale_v` centred on `offset_v`; beyond it a code stays at the rail.
    """
    scaled = np.subtract(volts, np.float32(offset_v), dtype=np.float32)
    scaled *= np.float32(2.0**bits / full_scale_v)
    np.rint(scaled, out=scaled)
    np.clip(scaled, -(2.0 ** (bits - 1)), 2.0 ** (bits - 1) - 1, out=scaled)
    return scaled.astype(np.int8) if bits == 8 else scaled.astype(np.int16)


def on_the_wire(codes: Codes, *, msb_first: bool, unsigned: bool) -> memoryview:
    """Bytes of the codes; unsigned codes are counted from the lower rail."""
    if codes.dtype.itemsize == 1:
        single: NDArray[np.uint8] = codes.view(np.uint8)
        return (single ^ np.uint8(0x80) if unsigned else single).data
    double: NDArray[np.uint16] = codes.view(np.uint16)
    if unsigned:
        double = double ^ np.uint16(0x8000)
    # no copy when the machine's own order is the one wanted
    ordered = np.ascontiguousarray(double, dtype=">u2" if msb_first else "<u2")
    return ordered.view(np.uint8).data
