"""Fraction of samples in which a recorded observable exceeds a value."""

from __future__ import annotations

import numpy as np

from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity
from reweight.tally.nodes import Column

__all__ = ["FractionAbove"]


class FractionAbove(Quantity):
    """``<1 if A > a else 0>``: a probability, whatever the observable is normalised to."""

    measure = Measure.NUMBER

    def __init__(self, column: Column) -> None:
        self.observable = column.observable
        self.name = f"{column.observable}.above"
        self.label = f"{column.observable}_above"
        self.long_name = f"fraction of samples with {column.observable} above {column.above:.12g}"
        self._moment = Moment(column)

    def value(self, moments: Moments) -> Array:
        """Return the fraction."""
        return moments[self._moment]

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return one: it is its own moment."""
        return {self._moment: np.ones_like(moments.beta)}
