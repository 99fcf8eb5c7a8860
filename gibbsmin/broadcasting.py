"""NumPy's broadcasting without its buffers.

Where operands of an operation differ in shape, NumPy copies them into buffers as long as a row of the result is shorter
than a third of its buffer (8192 numbers by default), and that copying costs three times the arithmetic itself. For
doubles, which need no conversion, a small buffer leaves the copies out.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np

SMALL_BUFFER = 256
"""Numbers; rows of a hundred and more are then worked on in place."""


@contextmanager
def unbuffered() -> Iterator[None]:
    """Keep NumPy from buffering doubles in this thread."""
    before = np.setbufsize(SMALL_BUFFER)
    try:
        yield
    finally:
        np.setbufsize(before)
