"""Heat capacity from energy fluctuations."""

from __future__ import annotations

from reweight.quantities.ensemble import CONSTANT_VOLUME, Ensemble
from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling

__all__ = ["HeatCapacity"]

FIRST, SECOND = Moment(power=1), Moment(power=2)


class HeatCapacity(Quantity):
    """``C = k_B beta**2 (<(E - c)**2> - <E - c>**2) + n k_B / 2``.

    Energies without their kinetic part leave out the k_B / 2 that each of n classical momenta adds (equipartition, exact
    for momenta without constraints among them); n is 0 unless it was declared.  With enthalpies, C is the one at constant
    pressure.

    The subtrahend vanishes for the origin used, to rounding; the textbook difference of averages loses all digits
    once the mean is large against the fluctuation.
    """

    name = "heat_capacity"
    label = "heat_capacity"
    measure = Measure.ENERGY_PER_KELVIN
    scaling = Scaling.EXTENSIVE
    fluctuation = True

    def __init__(self, ensemble: Ensemble = CONSTANT_VOLUME) -> None:
        self._degrees_of_freedom = ensemble.degrees_of_freedom
        self.long_name = (
            "heat capacity at constant pressure" if ensemble.constant_pressure else "heat capacity"
        )
        if ensemble.degrees_of_freedom:
            self.comment = f"includes {ensemble.degrees_of_freedom} k_B / 2 from declared degrees of freedom"

    def value(self, moments: Moments) -> Array:
        """Return the heat capacity."""
        factor = moments.boltzmann_constant * moments.beta**2
        kinetic = moments.boltzmann_constant * self._degrees_of_freedom / 2
        return factor * (moments[SECOND] - moments[FIRST] ** 2) + kinetic

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return the derivatives with respect to both moments."""
        factor = moments.boltzmann_constant * moments.beta**2
        return {SECOND: factor, FIRST: -2 * factor * moments[FIRST]}
