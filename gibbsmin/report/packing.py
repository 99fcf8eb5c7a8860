"""Numbers for the page's charts in few characters.

A value becomes the upper three bytes of its single-precision form (IEEE 754), rounded: a sign, eight bits of
exponent and fifteen of the fraction. That is a relative error of hardly more than 2^-16 (1.5e-5), so four printed
digits hold to within one unit of the last; the results file keeps all digits. Three bytes are exactly four
characters of base64 (RFC 4648), without a compressor whose output could differ between machines.
"""

from __future__ import annotations

import base64
from typing import Any

import numpy as np
from numpy.typing import NDArray

RELATIVE_ERROR = 2.0**-16 + 2.0**-24  # the second: of the step through single precision
SMALLEST = float(np.finfo(np.float32).tiny)  # what lies below becomes zero
_LARGEST = 3.38e38  # so far below the end of single precision that rounding up cannot leave it


def packed(values: Any) -> str:
    """Values (any shape, C order) as base64 of three bytes each, lowest byte first; NaN stays NaN."""
    bits = _rounded(np.asarray(values, dtype=np.float64).ravel()).view(np.uint32)
    octets = np.stack([(bits >> shift) & 0xFF for shift in (8, 16, 24)], axis=-1).astype(np.uint8)
    return base64.b64encode(octets.tobytes()).decode("ascii")


def unpacked(text: str) -> NDArray[np.float64]:
    """The inverse of `packed`, as the page does it."""
    octets = np.frombuffer(base64.b64decode(text), dtype=np.uint8).reshape(-1, 3).astype(np.uint32)
    bits = (octets[:, 0] << 8) | (octets[:, 1] << 16) | (octets[:, 2] << 24)
    return bits.view(np.float32).astype(np.float64)


def _rounded(values: NDArray[np.float64]) -> NDArray[np.float32]:
    """Single precision with the lowest byte rounded away; what is too large or infinite becomes NaN."""
    usable = np.abs(values) <= _LARGEST  # False for NaN
    single = np.where(usable & (np.abs(values) >= SMALLEST), values, 0.0).astype(np.float32)
    bits = (single.view(np.uint32) + np.uint32(0x80)) & np.uint32(0xFFFFFF00)
    return np.where(usable, bits.view(np.float32), np.float32(np.nan))
