"""How NumPy and the linear algebra beneath it go about arrays of this package: small matrices, long rows of doubles."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from functools import cache

import numpy as np
from threadpoolctl import ThreadpoolController

SMALL_BUFFER = 256
"""Numbers; rows of a hundred and more are then worked on in place."""


@contextmanager
def unbuffered() -> Iterator[None]:
    """Keep NumPy from buffering doubles in this thread.

    Where operands of an operation differ in shape, it copies them into buffers as long as a row of the result is
    shorter than a third of its buffer (8192 numbers by default), and that costs three times the arithmetic itself. For
    doubles, which need no conversion, a small buffer leaves the copies out.
    """
    before = np.setbufsize(SMALL_BUFFER)
    try:
        yield
    finally:
        np.setbufsize(before)


@contextmanager
def one_thread_for_linear_algebra() -> Iterator[None]:
    """Products of matrices this small take longer on several threads than on one, and threads of our own have work."""
    with _libraries().limit(limits=1, user_api="blas"):
        yield


@cache
def _libraries() -> ThreadpoolController:
    """Finding the libraries once is enough: it costs as much as solving a point."""
    return ThreadpoolController()
