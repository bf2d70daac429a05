"""From a column of times to the step between rows."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.clock import Clock
from reweight.reading.source import refusal

__all__ = ["Timekeeper"]

# Times are printed with few digits, so single steps differ; a row left out or written twice is off by a whole step.
LARGEST_SLIP = 0.5
LARGEST_DRIFT = 1.0  # steps, from the straight line through a run's times


class Timekeeper:
    """Follows the times of one run, chunk by chunk, and knows the step between its rows in the end."""

    def __init__(self) -> None:
        self._first = 0.0
        self._last = 0.0
        self._rows = 0

    @classmethod
    def resumed(cls, first: float, last: float, rows: int) -> Timekeeper:
        """Go on after so many rows between two times."""
        timekeeper = cls()
        timekeeper._first, timekeeper._last, timekeeper._rows = first, last, rows
        return timekeeper

    def add(self, times: NDArray[np.float64], path: Path, first_row: int) -> None:
        """Take the times of the next rows, the first of which has this number in its file (counted from 1).

        Raises
        ------
        DataFileError
            The times do not rise in equal steps.
        """
        seen = np.concatenate([[self._last], times]) if self._rows else times
        gaps = np.diff(seen)
        start = first_row + times.size - gaps.size  # number of the row after the first gap
        self._refuse(~(gaps > 0), seen, path, start, "must rise from row to row")
        if not self._rows:
            self._first = float(times[0])
        before, self._rows, self._last = self._rows, self._rows + times.size, float(times[-1])
        if self._rows < 2:
            return
        step = (self._last - self._first) / (self._rows - 1)
        self._refuse(np.abs(gaps - step) > LARGEST_SLIP * step, seen, path, start, "must rise in equal steps")
        line = self._first + step * np.arange(before, self._rows)
        drift = np.abs(times - line)[-gaps.size :]
        self._refuse(drift > LARGEST_DRIFT * step, seen, path, start, "must rise in equal steps")

    @staticmethod
    def _refuse(bad: NDArray[np.bool_], seen: NDArray[np.float64], path: Path, start: int, must: str) -> None:
        if not bad.any():
            return
        place = int(np.argmax(bad))
        raise refusal(
            path,
            f"times {must}; got {seen[place + 1]:.10g} after {seen[place]:.10g} ({int(bad.sum())} of {bad.size} such rows). "
            "Delete rows that were written twice and give files in time order; if rows are missing, or the interval "
            "changed, make it a run of its own, or remove columns.time from the study.",
            line=start + place,
            unit="row",
        )

    def clock(self, unit: str | None) -> Clock | None:
        """Step between rows; None without a unit, or with fewer than two rows."""
        if unit is None or self._rows < 2:
            return None
        return Clock(step=(self._last - self._first) / (self._rows - 1), unit=unit)
