"""Heat capacity from energy fluctuations."""

from __future__ import annotations

from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Array, Measure, Quantity, Scaling

__all__ = ["HeatCapacity"]

FIRST, SECOND = Moment(power=1), Moment(power=2)


class HeatCapacity(Quantity):
    """``C = k_B beta**2 (<(E - c)**2> - <E - c>**2)``.

    The subtrahend vanishes for the origin used, to rounding; the textbook difference of averages loses all digits
    once the mean is large against the fluctuation.
    """

    name = "heat_capacity"
    label = "heat_capacity"
    long_name = "heat capacity"
    measure = Measure.ENERGY_PER_KELVIN
    scaling = Scaling.EXTENSIVE
    fluctuation = True

    def value(self, moments: Moments) -> Array:
        """Return the heat capacity."""
        factor = moments.boltzmann_constant * moments.beta**2
        return factor * (moments[SECOND] - moments[FIRST] ** 2)

    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Return the derivatives with respect to both moments."""
        factor = moments.boltzmann_constant * moments.beta**2
        return {SECOND: factor, FIRST: -2 * factor * moments[FIRST]}
