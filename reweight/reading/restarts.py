"""Rows that a simulation wrote twice, because it was started again from a time before the end of what it had written.

The later rows count.  Where they begin is looked up before anything is read: the first time of every later file, and of
every section of a file behind a header written again.  So rows can be left out as they pass, and nothing is held back.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.reading.ledger import FileLedger
from reweight.reading.source import refusal

__all__ = ["Restarts"]


class Restarts:
    """Says which rows of a run's files are replaced by later ones.

    Parameters
    ----------
    starts : sequence of sequences of float
        For every file, in order, the first time of each of its sections.
    """

    def __init__(self, starts: Sequence[Sequence[float]]) -> None:
        self._starts = starts
        self._last_replaced = -math.inf
        self._place = (0, 0)

    def limit(self, file: int, section: int) -> float:
        """Time from which on later parts wrote the rows of a section again; infinite if none did."""
        later = [*self._starts[file][section + 1 :], *(s for each in self._starts[file + 1 :] for s in each)]
        return min(later, default=math.inf)

    def kept(self, times: NDArray[np.float64], file: int, section: int, path: Path, first_row: int) -> int:
        """Count how many of the next rows are not replaced; these come first.

        Parameters
        ----------
        times : numpy.ndarray, shape (N,)
            Of rows of one section.
        file, section : int
            Counted from 0.
        path, first_row
            The file and the number of the first of the rows in it, counted from 1, for messages.

        Raises
        ------
        DataFileError
            Times among the rows to be replaced do not rise, so that nobody knows which rows they are.
        """
        if self._place != (file, section):
            self._place, self._last_replaced = (file, section), -math.inf
        again = times >= self.limit(file, section)
        keep = 0 if self._last_replaced > -math.inf else int(again.argmax()) if again.any() else times.size
        passed = np.concatenate([[self._last_replaced], times[keep:]])
        bad = ~(np.diff(passed) > 0)
        if bad.any():
            place = int(bad.argmax())
            raise refusal(
                path,
                f"times must rise from row to row; got {passed[place + 1]:.10g} after {passed[place]:.10g}, among rows "
                "that a later part of the run wrote again. Correct the times, or delete these rows.",
                line=first_row + keep + place,
                unit="row",
            )
        if keep < times.size:
            self._last_replaced = float(times[-1])
        return keep

    @staticmethod
    def refuse_replaced(path: Path, ledger: FileLedger) -> None:
        """Refuse a file of which no row is left: files may be in the wrong order."""
        if ledger.rows_read and ledger.replaced == ledger.rows_read:
            raise refusal(
                path,
                f"files of a run must be in time order; a later file starts at or before the first row of this one, so all "
                f"its {ledger.rows_read} rows would be replaced. Correct the order, or leave this file out.",
            )
