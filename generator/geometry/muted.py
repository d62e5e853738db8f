"""Silence for a solver that prints to standard output whatever its log level is.

HiGHS (to 1.12 at least) prints a line of its own when it repairs a whole-number solution; it is no
matter of the reader's.
"""

from __future__ import annotations

import contextlib
import ctypes
import os
import sys
from collections.abc import Iterator


@contextlib.contextmanager
def muted() -> Iterator[None]:
    """Send what compiled code prints to standard output nowhere; does nothing where that can't be done."""
    try:
        flush = ctypes.CDLL(None).fflush
        sys.stdout.flush()
        flush(None)
        kept = os.dup(1)
    except (OSError, TypeError, AttributeError, ValueError):
        yield
        return
    try:
        with open(os.devnull, "wb") as nowhere:  # noqa: PTH123 - a descriptor is what is wanted
            os.dup2(nowhere.fileno(), 1)
        yield
    finally:
        flush(None)
        os.dup2(kept, 1)
        os.close(kept)
