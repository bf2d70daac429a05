"""Free energy over k_B T, as a difference from a reference temperature."""

from __future__ import annotations

import numpy as np

from reweight.quantities.ensemble import CONSTANT_VOLUME, Ensemble
from reweight.quantities.moments import LOG_PARTITION, Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling

__all__ = ["FreeEnergy"]


class FreeEnergy(Quantity):
    """``beta F = -ln Z``: what runs at several temperatures determine without any convention, up to a constant.

    A difference of F itself would need the absolute number of states, which canonical runs leave open.
    """

    name = "free_energy"
    label = "free_energy"
    measure = Measure.NUMBER
    scaling = Scaling.EXTENSIVE
    from_reference = True

    def __init__(self, ensemble: Ensemble = CONSTANT_VOLUME) -> None:
        kind = "Gibbs energy" if ensemble.constant_pressure else "free energy"
        self.long_name = f"{kind} over k_B T"

    def value(self, moments: Moments) -> Array:
        """Return ``-ln Z`` up to a constant."""
        return -moments[LOG_PARTITION]

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return minus one."""
        return {LOG_PARTITION: -np.ones_like(moments.beta)}
