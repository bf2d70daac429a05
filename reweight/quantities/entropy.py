"""Entropy, as a difference from a reference temperature."""

from __future__ import annotations

import numpy as np

from reweight.quantities.moments import LOG_PARTITION, Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling

__all__ = ["Entropy"]

FIRST = Moment(power=1)


class Entropy(Quantity):
    """``S = k_B (ln Z + beta <E>)``, up to the constant that canonical runs leave open.

    Energies are taken relative to the reference energy: it cancels between the two terms, and so do its digits.
    """

    name = "entropy"
    label = "entropy"
    long_name = "entropy"
    measure = Measure.ENERGY_PER_KELVIN
    scaling = Scaling.EXTENSIVE
    from_reference = True

    def value(self, moments: Moments) -> Array:
        """Return the entropy up to a constant."""
        canonical = moments.canonical
        relative = moments.log_partition + moments.beta * (canonical.mean_energy + moments[FIRST])
        return np.asarray(moments.boltzmann_constant * relative)

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return the derivatives with respect to ``ln Z`` and the mean energy."""
        factor = np.full_like(moments.beta, moments.boltzmann_constant)
        return {LOG_PARTITION: factor, FIRST: factor * moments.beta}
