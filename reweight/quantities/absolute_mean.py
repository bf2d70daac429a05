"""Mean of the absolute value of a recorded observable."""

from __future__ import annotations

import numpy as np

from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling
from reweight.tally.nodes import Column

__all__ = ["AbsoluteMean"]


class AbsoluteMean(Quantity):
    """``<|A|>``: what is meant by the order of a finite system, whose signed mean vanishes by symmetry."""

    measure = Measure.OBSERVABLE

    def __init__(self, column: Column, scaling: Scaling) -> None:
        self.observable = column.observable
        self.scaling = scaling
        self.name = f"{column.observable}.absolute_mean"
        self.label = f"{column.observable}_absolute_mean"
        self.long_name = f"mean absolute {column.observable}"
        self._moment = Moment(column)

    def value(self, moments: Moments) -> Array:
        """Return the mean."""
        return moments[self._moment]

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return one: it is its own moment."""
        return {self._moment: np.ones_like(moments.beta)}
