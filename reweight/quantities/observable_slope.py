"""Covariance of an observable with the energy, and its slope against temperature, which is the same thing."""

from __future__ import annotations

import numpy as np

from reweight.quantities.ensemble import Ensemble
from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling
from reweight.tally.nodes import Column

__all__ = ["ObservableCovariance", "ObservableSlope"]

ENERGY = Moment(power=1)


class ObservableCovariance(Quantity):
    """``<A (E - c)> - <A> <E - c>``."""

    measure = Measure.OBSERVABLE_ENERGY
    fluctuation = True

    def __init__(self, observable: str, scaling: Scaling, ensemble: Ensemble) -> None:
        self.observable = observable
        self.scaling = scaling
        self.name = f"{observable}.covariance"
        self.label = f"{observable}_covariance"
        self.long_name = f"covariance of {observable} with the {ensemble.energy_name}"
        self._mean = Moment(Column(observable, 1))
        self._product = Moment(Column(observable, 1), 1)

    def _factor(self, moments: Moments) -> Array:
        return np.ones_like(moments.beta)

    def value(self, moments: Moments) -> Array:
        """Return the covariance, or a multiple of it."""
        return self._factor(moments) * (moments[self._product] - moments[self._mean] * moments[ENERGY])

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return the derivatives with respect to the three moments."""
        factor = self._factor(moments)
        return {
            self._product: factor,
            self._mean: -factor * moments[ENERGY],
            ENERGY: -factor * moments[self._mean],
        }


class ObservableSlope(ObservableCovariance):
    """``d<A>/dT = k_B beta**2 (<A E> - <A> <E>)``: no finite difference of noisy curves."""

    measure = Measure.OBSERVABLE_PER_KELVIN

    def __init__(self, observable: str, scaling: Scaling, ensemble: Ensemble) -> None:
        super().__init__(observable, scaling, ensemble)
        self.name = f"{observable}.slope"
        self.label = f"{observable}_slope"
        self.long_name = f"change of mean {observable} with temperature"

    def _factor(self, moments: Moments) -> Array:
        return np.asarray(moments.boltzmann_constant * moments.beta**2)
