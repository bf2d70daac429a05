"""The time that passes between two samples of a run."""

from __future__ import annotations

import math
from dataclasses import dataclass

from reweight.units import time_factor

__all__ = ["Clock"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Clock:
    """Time between neighbouring samples.

    Attributes
    ----------
    step : float
        In the unit; positive.
    unit : str
        A unit of time, or ``"step"``, ``"sweep"`` or ``"reduced"``.
    """

    step: float
    unit: str

    def rows(self, time: float, unit: str) -> int:
        """Rows within a time, rounded up.

        Raises
        ------
        InputError
            The unit cannot be converted to that of the clock.
        """
        # Times such as 0.3 and steps such as 0.1 are not exact in binary; no row more for that.
        return math.ceil(time * time_factor(unit, self.unit) / self.step * (1 - 1e-9))

    def text_unit(self) -> str:
        """Unit as written on screen; empty for reduced units."""
        return "" if self.unit == "reduced" else self.unit
