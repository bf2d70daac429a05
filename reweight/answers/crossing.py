r"""Crossings: the temperatures at which a quantity takes a value, and how well they are known.

Where ``y(T) = a``, a sample moves the temperature by ``dT = -I_y / y'`` and the slope found there by
``I_{y'} + y'' dT``, with I the influence functions.  The error of the temperature is that of a straight line through
the crossing: where the slope is lost in its own error, which the curvature adds to, it means little.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from reweight.answers.evaluate import evaluate, values
from reweight.answers.presentation import Presentation, presentation
from reweight.answers.search import FIRST_DERIVATIVE, SECOND_DERIVATIVE, search_grid, search_limits, stencil
from reweight.answers.support import origin_beta
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError, NoCrossingError
from reweight.notation import quantity_text, significant
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.window import variance

__all__ = ["Crossing", "crossings"]

Array = NDArray[np.float64]

CLEAR_SLOPE = 3.0  # standard errors; below, a straight line is no picture of the curve within its error
ROUNDING = 1e-13  # of the largest value: a curve this close to the value has it


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Crossing:
    """Where a quantity takes a value, and how well that is known.

    Attributes
    ----------
    of : str
        Name of the quantity.
    equals : float
        The value.
    unit : str
        Of the value.
    per : str or None
        What the value is per.
    reference_temperature : float or None
        From which entropies and free energies are counted; None for everything else.
    temperature, temperature_standard_error : float
        In the study's temperature unit.
    temperature_interval : tuple of float
    slope, slope_standard_error : float
        Change of the quantity with temperature at the crossing, in the unit of the value per temperature unit.
    slope_significant : bool
        The slope is at least three of its standard errors.  Otherwise the curve hardly crosses, and neither the
        standard error nor the interval of the temperature is to be trusted.
    effective_sample_size : float
    within_reach : bool
    variance_share : dict of str to float
        Each run's share of the variance of the temperature.
    """

    of: str
    equals: float
    unit: str
    per: str | None
    reference_temperature: float | None
    temperature: float
    temperature_standard_error: float
    temperature_interval: tuple[float, float]
    slope: float
    slope_standard_error: float
    slope_significant: bool
    effective_sample_size: float
    within_reach: bool
    variance_share: dict[str, float]


def crossings(
    combined: DensityOfStates,
    *,
    of: str,
    equals: float,
    lowest: float | None = None,
    highest: float | None = None,
    level: float = 0.95,
    per_count: bool = False,
    energy_unit: str | None = None,
    beyond_reach: bool = False,
) -> tuple[Crossing, ...]:
    """Temperatures at which a quantity takes a value, ascending.

    Parameters
    ----------
    combined : DensityOfStates
    of : str
        Name of the quantity.  Entropies and free energies are counted as in :func:`reweight.curve`: from the coldest
        run within reach.
    equals : float
        The value, in the unit in which answers are given.
    lowest, highest : float, optional
        Temperatures between which to look; by default the reach of the quantity.
    level : float
        Of the confidence intervals.
    per_count, energy_unit
        As in :func:`reweight.curve`; they apply to the value.
    beyond_reach : bool
        Look outside the reach, too, if the limits ask for it.

    Returns
    -------
    tuple of Crossing
        Never empty.

    Raises
    ------
    NoCrossingError
        The quantity does not take the value between the limits, or takes it all along a stretch of temperatures.
    OutOfReachError
        Nothing between the limits is within reach.
    InputError
        The value is not finite, or the limits are out of order.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(1)
    >>> runs = {f"T={t}": rng.gamma(30.0, t, 5000) for t in (1.0, 1.2, 1.4)}
    >>> combined = rw.combine(runs, temperatures=[1.0, 1.2, 1.4])
    >>> (found,) = rw.crossings(combined, of="energy", equals=33.0)  # of a mean energy of 30 T
    >>> bool(abs(found.temperature - 1.1) < 4 * found.temperature_standard_error)
    True
    """
    check_level(level)
    (quantity,) = combined.quantities([of])
    if not np.isfinite(equals):
        raise InputError(f"equals must be finite; got {equals}. Give the value that {of} is to take.")
    shown = presentation(combined, quantity, per_count=per_count, energy_unit=energy_unit)
    cold, hot = search_limits(
        combined, quantity, lowest, highest, beyond_reach=beyond_reach, sought="crossing"
    )
    reference = origin_beta(combined, [quantity], None, beyond_reach=beyond_reach)
    zero = float(values(combined, quantity, np.array([reference]))[0]) if quantity.from_reference else 0.0
    target = equals / shown.factor + zero

    def excess(beta: Array) -> Array:
        return values(combined, quantity, beta) - target

    grid = search_grid(combined, hot, cold)
    above = excess(grid)
    above[np.abs(above) <= ROUNDING * max(abs(target), np.abs(above + target).max())] = 0.0
    places = _places(excess, grid, above)
    flat = np.flatnonzero((above[:-1] == 0) & (above[1:] == 0))
    if not places or flat.size:
        stretch = grid[[flat[0], flat[-1] + 1]] if flat.size else None
        raise _none(combined, quantity, equals, shown, grid, (above + target - zero) * shown.factor, stretch)
    return tuple(
        _crossing(combined, quantity, equals, beta, reference, level, shown) for beta in reversed(places)
    )


def _places(excess: Callable[[Array], Array], grid: Array, above: Array) -> list[float]:
    """Inverse temperatures where the excess over the value is zero, ascending; the ends of the grid count."""
    places = [float(beta) for beta in grid[above == 0]]
    for place in np.flatnonzero(above[:-1] * above[1:] < 0):
        places.append(
            float(
                brentq(
                    lambda beta: float(excess(np.array([beta]))[0]),
                    grid[place],
                    grid[place + 1],
                    xtol=1e-14 * grid[-1],
                )
            )
        )
    return sorted(places)


def _crossing(
    combined: DensityOfStates,
    quantity: Quantity,
    equals: float,
    beta: float,
    reference: float,
    level: float,
    shown: Presentation,
) -> Crossing:
    points, step = stencil(combined, beta)
    (around,) = evaluate(combined, [quantity], points, reference=reference)
    middle = 4
    k = combined.description.boltzmann_constant
    first = float(FIRST_DERIVATIVE @ around.value / step)
    second = float(SECOND_DERIVATIVE @ around.value / step**2)
    per_temperature = -k * beta**2  # dbeta/dT
    slope = per_temperature * first
    curvature = k**2 * beta**3 * (2 * first + beta * second)
    known = slope != 0  # it is zero at infinite temperature, which has no error
    blocks = []
    for block in around.blocks:
        moved = -block[:, middle] / slope if known else np.zeros(block.shape[0])
        turned = per_temperature * (block @ FIRST_DERIVATIVE) / step + curvature * moved
        blocks.append(np.stack([moved, turned], axis=1))
    spread = variance(blocks, coupled=combined.description.exchange)
    half = half_width(spread.standard_error, spread.degrees_of_freedom, level)
    temperature = float(combined.description.temperature(beta))
    error, width = (float(spread.standard_error[0]), float(half[0])) if known else (np.nan, np.nan)
    return Crossing(
        of=quantity.name,
        equals=float(equals),
        unit=shown.unit,
        per=shown.per,
        reference_temperature=(
            float(combined.description.temperature(reference)) if quantity.from_reference else None
        ),
        temperature=temperature,
        temperature_standard_error=error,
        temperature_interval=(temperature - width, temperature + width),
        slope=slope * shown.factor,
        slope_standard_error=float(spread.standard_error[1]) * abs(shown.factor),
        slope_significant=bool(known and abs(slope) >= CLEAR_SLOPE * spread.standard_error[1]),
        effective_sample_size=float(around.effective_sample_size[middle]),
        within_reach=bool(around.within_reach[middle]),
        variance_share={run.name: float(spread.shares[i, 0]) for i, run in enumerate(combined.runs)},
    )


def _none(
    combined: DensityOfStates,
    quantity: Quantity,
    equals: float,
    shown: Presentation,
    grid: Array,
    taken: Array,
    stretch: Array | None,
) -> NoCrossingError:
    """Say which values the quantity takes on the grid, and where others may be found."""
    unit = combined.description.temperature_label
    hot, cold = (significant(float(t)) for t in combined.description.temperature(grid[[0, -1]]))
    low, high = float(taken.min()), float(taken.max())
    if stretch is not None:
        end, start = (significant(float(t), 6) for t in combined.description.temperature(stretch))
        return NoCrossingError(
            f"equals must be a value that {quantity.name} takes at single temperatures; got {equals:g}, which it has all "
            f"along from {start} to {quantity_text(end, unit)}. Ask for another value.",
            taken=(low, high),
        )
    nearest = int(np.argmin(np.abs(taken - equals)))
    beyond = {0: f" hotter than {hot}", taken.size - 1: f" colder than {cold}"}.get(nearest)
    hint = "" if beyond is None else f", or look, or add runs,{quantity_text(beyond, unit)}"
    return NoCrossingError(
        f"equals must lie between {significant(low, 6)} and {quantity_text(significant(high, 6), shown.unit)}, the values "
        f"that {quantity.name}{f' per {shown.per}' if shown.per else ''} takes from {cold} to "
        f"{quantity_text(hot, unit)}; got {equals:g}. Ask for a value in between{hint}.",
        taken=(low, high),
    )
