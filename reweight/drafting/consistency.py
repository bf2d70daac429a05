"""Whether energies can have the unit they are said to have: their fluctuations tell.

In a canonical run dE/d(beta) = -Var(E), so between two neighbouring temperatures the mean must rise by the difference of
the inverse temperatures times the variance.  Energies that are too small by a factor, because they are in another unit or
counted per atom, rise too much for their fluctuations by that same factor: the rise has the factor once, the variance
twice.  (Fluctuation theorem of any statistical mechanics text; R. K. Pathria, Statistical Mechanics, section 3.6; from
memory.)  A trapezoid for the variance and a transient make the comparison rough, so only factors above 2 count.
"""

from __future__ import annotations

import itertools
import math
import statistics
from collections.abc import Sequence
from dataclasses import dataclass

from reweight import units

__all__ = ["HOTTEST_REDUCED", "LARGEST_FACTOR", "Point", "excess_of_rise", "fitting_units"]

LARGEST_FACTOR = 2.0
HOTTEST_REDUCED = 50.0  # a temperature above it is hardly one in units of a coupling
_NEAREST, _FARTHEST = (
    0.2,
    8.0,
)  # widths between the means of a pair; nearer it is noise, farther the trapezoid fails
_COMMON_UNITS = ("kJ/mol", "kcal/mol", "J/mol", "eV", "meV", "hartree", "rydberg", "cm^-1")


@dataclass(frozen=True, slots=True, kw_only=True)
class Point:
    """A run as the comparison sees it.

    Attributes
    ----------
    key : str
        ``"temperature"`` or ``"beta"``.
    value : float
        In the unit of the runs.
    temperature_unit : str
        ``"K"``, ``"degC"`` or empty.
    mean, variance : float
        Of the energies as they are in the file.
    """

    key: str
    value: float
    temperature_unit: str
    mean: float
    variance: float

    def beta(self, unit: str) -> float:
        """Inverse temperature in one over this unit of energy."""
        if self.key == "beta":
            return self.value
        if unit == units.REDUCED:
            return 1.0 / self.value
        boltzmann = units.boltzmann_constant(unit, "K")
        return 1.0 / (boltzmann * units.to_kelvin(self.value, self.temperature_unit or "K"))


def excess_of_rise(points: Sequence[Point], unit: str) -> float | None:
    """Rise of the mean energy with temperature over what its fluctuations allow; None if no two runs can tell.

    Parameters
    ----------
    points : sequence of Point
    unit : str
        Unit the energies are taken to have.

    Returns
    -------
    float or None
        About 1 if the unit is right; the median over neighbouring temperatures.
    """
    usable = [point for point in points if point.variance > 0 and 0 < point.value < math.inf]
    ordered = sorted(usable, key=lambda point: point.beta(unit))
    found = []
    for hot, cold in itertools.pairwise(ordered):
        rise = hot.mean - cold.mean
        width = math.sqrt(min(hot.variance, cold.variance))
        allowed = (cold.beta(unit) - hot.beta(unit)) * (hot.variance + cold.variance) / 2
        if allowed > 0 and _NEAREST * width < rise < _FARTHEST * width:
            found.append(rise / allowed)
    found = [ratio for ratio in found if 0 < ratio < math.inf]  # else the magnitudes are absurd
    return statistics.median(found) if found else None


def fitting_units(points: Sequence[Point]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Units of energy in which rise and fluctuations agree, and the other common ones."""
    candidates: tuple[str, ...]
    if any(point.temperature_unit for point in points):
        candidates = (*_COMMON_UNITS, "K")
    elif points and all(0 < point.value < HOTTEST_REDUCED for point in points):
        candidates = (units.REDUCED, *_COMMON_UNITS)
    else:
        candidates = (*_COMMON_UNITS, "K", units.REDUCED)
    if all(point.key == "beta" for point in points):
        return (), candidates  # an inverse energy agrees with the energies in any unit
    found = {unit: excess_of_rise(points, unit) for unit in candidates}
    closeness = {unit: abs(math.log(excess)) for unit, excess in found.items() if excess is not None}
    fitting = sorted(
        (unit for unit, off in closeness.items() if off < math.log(LARGEST_FACTOR)),
        key=lambda unit: closeness[unit],
    )
    return tuple(fitting), tuple(unit for unit in candidates if unit not in fitting)
