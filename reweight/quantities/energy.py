"""Mean energy."""

from __future__ import annotations

import numpy as np

from reweight.quantities.ensemble import CONSTANT_VOLUME, Ensemble
from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling

__all__ = ["MeanEnergy"]

FIRST = Moment(power=1)


class MeanEnergy(Quantity):
    """``<E> = c + <E - c>``."""

    name = "energy"
    label = "mean_energy"
    measure = Measure.ENERGY
    scaling = Scaling.EXTENSIVE

    def __init__(self, ensemble: Ensemble = CONSTANT_VOLUME) -> None:
        self.long_name = f"mean {ensemble.energy_name}"

    def value(self, moments: Moments) -> Array:
        """Return the mean energy."""
        return moments.origin + moments[FIRST]

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return one: it is its own moment."""
        return {FIRST: np.ones_like(moments.beta)}
