"""What looking for a place on a curve needs: between which temperatures, on which grid, and derivatives there.

Nine-point differences on a scale of 0.08 standard deviations of the energy are exact to about 1e-8 of the width of
anything a canonical curve can show.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.answers.reach import reach
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError, OutOfReachError
from reweight.quantities.quantity import Quantity

__all__ = ["FIRST_DERIVATIVE", "SECOND_DERIVATIVE", "STEP", "search_grid", "search_limits", "stencil"]

Array = NDArray[np.float64]

FIRST_DERIVATIVE = np.array([1 / 280, -4 / 105, 1 / 5, -4 / 5, 0, 4 / 5, -1 / 5, 4 / 105, -1 / 280])
SECOND_DERIVATIVE = np.array([-1 / 560, 8 / 315, -1 / 5, 8 / 5, -205 / 72, 8 / 5, -1 / 5, 8 / 315, -1 / 560])
STEP = 0.08

GRID_STEP = 0.2  # in thermodynamic length: finer than anything a canonical curve can show
MOST_GRID_POINTS = 4000


def search_limits(
    combined: DensityOfStates,
    quantity: Quantity,
    lowest: float | None,
    highest: float | None,
    *,
    beyond_reach: bool,
    sought: str,
) -> tuple[float, float]:
    """Inverse temperatures between which to look, cold first: the reach, narrowed by what was asked or replaced by it.

    Parameters
    ----------
    combined : DensityOfStates
    quantity : Quantity
    lowest, highest : float or None
        Temperatures that were asked.
    beyond_reach : bool
        What was asked replaces the reach.
    sought : str
        What is looked for, for the message of a refusal.

    Raises
    ------
    OutOfReachError
        Nothing between the limits is within reach.
    InputError
        The limits are out of order.
    """
    if not (beyond_reach and lowest is not None and highest is not None):
        within = reach(combined, quantity.name)
        if within.empty:
            raise OutOfReachError(
                f"the runs must support {quantity.name} somewhere to find a {sought}; got too few independent samples "
                f"({within.limited_by[0]}). Sample longer.",
                outside=combined.temperatures,
            )
        low = within.lowest if lowest is None else lowest
        high = within.highest if highest is None else highest
        _refuse_disorder(low, high)
        if not beyond_reach:
            low, high = max(low, within.lowest), min(high, within.highest)
            if not low < high:
                raise OutOfReachError(
                    f"a {sought} is looked for within [{within.lowest:.4g}, {within.highest:.4g}], the reach of these runs "
                    f"for {quantity.name}; got {lowest:g} to {highest:g}, which lies outside. Ask within it, or beyond the "
                    "reach.",
                    outside=np.array([lowest, highest]),
                    reach=(within.lowest, within.highest),
                )
        lowest, highest = low, high
    _refuse_disorder(lowest, highest)
    cold, hot = combined.description.inverse_temperature([lowest, highest])
    return float(cold), float(hot)


def _refuse_disorder(low: float, high: float) -> None:
    if not low < high:
        raise InputError(f"the lowest temperature must be below the highest; got {low:g} and {high:g}.")


def search_grid(combined: DensityOfStates, hot: float, cold: float) -> Array:
    """Inverse temperatures fine enough to see every maximum and every crossing, ascending.

    The thermodynamic length of a step is at most ``sqrt(step * |change of the mean energy|)`` (Cauchy-Schwarz); steps
    are halved until all are short.
    """
    estimate = combined.estimate
    inner = estimate.beta[(estimate.beta > hot) & (estimate.beta < cold)]
    grid = np.unique(np.concatenate([np.linspace(hot, cold, 65), inner]))
    mean = estimate.canonical(grid).mean_energy
    while grid.size < MOST_GRID_POINTS:
        length = np.sqrt(np.diff(grid) * np.abs(np.diff(mean)))
        long = np.flatnonzero(length > GRID_STEP)
        if long.size == 0:
            break
        middle = (grid[long] + grid[long + 1]) / 2
        mean = np.insert(mean, long + 1, estimate.canonical(middle).mean_energy)
        grid = np.insert(grid, long + 1, middle)
    return grid


def stencil(combined: DensityOfStates, beta: float) -> tuple[Array, float]:
    """Nine inverse temperatures around one, and their distance."""
    canonical = combined.estimate.canonical(np.array([beta]))
    deviation = float(np.sqrt(combined.estimate.weights[0] @ canonical.weighted_power(2))[0])
    step = STEP / deviation
    return np.asarray(beta + step * np.arange(-4, 5)), step
