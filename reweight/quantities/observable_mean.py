"""Mean of a recorded observable."""

from __future__ import annotations

import numpy as np

from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling
from reweight.tally.nodes import Column

__all__ = ["ObservableMean"]


class ObservableMean(Quantity):
    """``<A>``."""

    measure = Measure.OBSERVABLE

    def __init__(self, observable: str, scaling: Scaling) -> None:
        self.observable = observable
        self.scaling = scaling
        self.name = f"{observable}.mean"
        self.label = f"{observable}_mean"
        self.long_name = f"mean {observable}"
        self._moment = Moment(Column(observable, 1))

    def value(self, moments: Moments) -> Array:
        """Return the mean."""
        return moments[self._moment]

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return one: it is its own moment."""
        return {self._moment: np.ones_like(moments.beta)}
