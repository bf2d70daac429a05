"""Freed memory kept for the next use.

Array layer: NumPy only.

The C library of Linux gives the top of its heap back to the system once more is free than twice the largest block freed so
far.  Fetching it again costs a page fault every 4 kB: where blocks of some 100 kB come and go, as they do here, that
took as long as all sums together (tally of 16 runs of 20,000 rows: 15 ms, and 8.5 ms without).  One large block, freed
at once and never touched, raises that mark.  Elsewhere it does nothing, at no cost.
"""

from __future__ import annotations

import numpy as np

__all__ = ["keep_freed_memory"]

BLOCK = 2**24  # bytes; up to 32 MB count


def keep_freed_memory() -> None:
    """Let up to 32 MB of freed memory stay with the process."""
    np.empty(BLOCK, np.uint8)
