r"""Peaks of any quantity: where, how high, how well known, and whether they stand out from their noise.

A maximum of ``y(beta)`` satisfies ``y' = 0``.  Its position moves by ``-I_{y'} / y''`` and its height by ``I_y`` when a
sample is added, with I the influence functions; derivatives are linear in y, so the block sums of ``y'`` are the same
differences of block sums.  Nine-point differences on a scale of 0.08 standard deviations of the energy are exact to
about 1e-8 of the width of anything a canonical curve can show.

Position and height do not depend on whether the curve is drawn against temperature or inverse temperature.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from reweight.answers.evaluate import evaluate, values
from reweight.answers.presentation import presentation
from reweight.answers.reach import reach
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError, OutOfReachError
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.window import correlation, variance

__all__ = ["Peak", "peaks"]

Array = NDArray[np.float64]

FIRST_DERIVATIVE = np.array([1 / 280, -4 / 105, 1 / 5, -4 / 5, 0, 4 / 5, -1 / 5, 4 / 105, -1 / 280])
SECOND_DERIVATIVE = np.array([-1 / 560, 8 / 315, -1 / 5, 8 / 5, -205 / 72, 8 / 5, -1 / 5, 8 / 315, -1 / 560])
STEP = 0.08

GRID_STEP = 0.2  # in thermodynamic length: finer than anything a canonical curve can show
MOST_GRID_POINTS = 4000

# Among the several independent maxima that noise draws, three standard errors are passed in less than about 1 %.
STANDS_OUT = 3.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Peak:
    """Where a curve is largest, and how well that is known.

    Attributes
    ----------
    of : str
        Name of the quantity.
    temperature, temperature_standard_error : float
        In the study's temperature unit.
    temperature_interval : tuple of float
    temperature_bias : float or None
        Known only from resampling.
    height, height_standard_error : float
    height_interval : tuple of float
    unit : str
        Of the height.
    per : str or None
        What the height is per.
    correlation : float
        Of the errors of position and height.
    prominence : float
        How far the maximum rises above the higher of the two valleys beside it, in standard errors of that difference.
    stands_out : bool
        The prominence exceeds what noise alone draws.
    at_edge : bool
        The maximum sits on a limit of the searched interval: the real peak may lie beyond it, and the standard errors
        of the position mean nothing.
    effective_sample_size : float
    within_reach : bool
    variance_share : dict of str to (float, float)
        Each run's share of the variance of position and height.
    """

    of: str
    temperature: float
    temperature_standard_error: float
    temperature_interval: tuple[float, float]
    temperature_bias: float | None
    height: float
    height_standard_error: float
    height_interval: tuple[float, float]
    unit: str
    per: str | None
    correlation: float
    prominence: float
    stands_out: bool
    at_edge: bool
    effective_sample_size: float
    within_reach: bool
    variance_share: dict[str, tuple[float, float]]


def peaks(
    combined: DensityOfStates,
    *,
    of: str = "heat_capacity",
    lowest: float | None = None,
    highest: float | None = None,
    level: float = 0.95,
    per_count: bool = False,
    energy_unit: str | None = None,
    beyond_reach: bool = False,
) -> tuple[Peak, ...]:
    """Maxima of a quantity between two temperatures, most prominent first.

    Parameters
    ----------
    combined : DensityOfStates
    of : str
        Name of the quantity.
    lowest, highest : float, optional
        Temperatures between which to look; by default the reach of the quantity.
    level : float
        Of the confidence intervals.
    per_count, energy_unit
        As in :func:`reweight.curve`; they apply to the height.
    beyond_reach : bool
        Look outside the reach, too, if the limits ask for it.

    Returns
    -------
    tuple of Peak
        Never empty: a curve without an interior maximum has its highest point ``at_edge``.

    Raises
    ------
    OutOfReachError
        Nothing between the limits is within reach.
    InputError
        The limits are out of order.
    """
    check_level(level)
    (quantity,) = combined.quantities([of])
    shown = presentation(combined, quantity, per_count=per_count, energy_unit=energy_unit)
    cold, hot = _limits(combined, quantity, lowest, highest, beyond_reach=beyond_reach)
    grid = _grid(combined, hot, cold)
    heights = values(combined, quantity, grid)
    found = []
    for place in _maxima(heights):
        edge = place in (0, grid.size - 1)
        beta = float(grid[place]) if edge else _refined(combined, quantity, grid[place - 1], grid[place + 1])
        valley = float(grid[_key_valley(heights, place)])
        found.append(
            _peak(combined, quantity, beta, valley, edge, level, shown.factor, shown.unit, shown.per)
        )
    return tuple(sorted(found, key=lambda peak: -peak.prominence))


def _limits(
    combined: DensityOfStates,
    quantity: Quantity,
    lowest: float | None,
    highest: float | None,
    *,
    beyond_reach: bool,
) -> tuple[float, float]:
    """Inverse temperatures between which to look: the reach, narrowed by what was asked (or replaced by it)."""
    within = reach(combined, quantity.name)
    if within.empty and not (beyond_reach and lowest is not None and highest is not None):
        raise OutOfReachError(
            f"the runs must support {quantity.name} somewhere to find its peak; got too few independent samples "
            f"({within.limited_by[0]}). Sample longer.",
            outside=combined.temperatures,
        )
    low = within.lowest if lowest is None else lowest
    high = within.highest if highest is None else highest
    if not low < high:
        raise InputError(f"the lowest temperature must be below the highest; got {low:g} and {high:g}.")
    if not beyond_reach:
        low, high = max(low, within.lowest), min(high, within.highest)
        if not low < high:
            raise OutOfReachError(
                f"a peak is looked for within [{within.lowest:.4g}, {within.highest:.4g}], the reach of these runs for "
                f"{quantity.name}; got {lowest:g} to {highest:g}, which lies outside. Ask within it, or beyond the reach.",
                outside=np.array([lowest, highest]),
                reach=(within.lowest, within.highest),
            )
    cold, hot = combined.description.inverse_temperature([low, high])
    return float(cold), float(hot)


def _grid(combined: DensityOfStates, hot: float, cold: float) -> Array:
    """Inverse temperatures fine enough to see every maximum, ascending.

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


def _maxima(heights: Array) -> list[int]:
    """Places of local maxima; the ends count if the curve still rises towards them and nothing inside is as high."""
    inside = np.flatnonzero((heights[1:-1] > heights[:-2]) & (heights[1:-1] >= heights[2:])) + 1
    highest = int(np.argmax(heights))
    places = [int(place) for place in inside]
    return [*places, highest] if highest in (0, heights.size - 1) else places


def _key_valley(heights: Array, place: int) -> int:
    """Place of the higher of the two valleys that part a maximum from higher ground, or from the ends."""
    valleys = []
    for step in (-1, 1):
        side = np.arange(place + step, heights.size if step > 0 else -1, step)
        if side.size == 0:
            continue
        higher = np.flatnonzero(heights[side] > heights[place])
        if higher.size:
            side = side[: higher[0] + 1]
        valleys.append(int(side[np.argmin(heights[side])]))
    return max(valleys, key=lambda valley: heights[valley])


def _stencil(combined: DensityOfStates, beta: float) -> tuple[Array, float]:
    """Nine inverse temperatures around one, and their distance."""
    canonical = combined.estimate.canonical(np.array([beta]))
    deviation = float(np.sqrt(combined.estimate.weights[0] @ canonical.weighted_power(2))[0])
    step = STEP / deviation
    return np.asarray(beta + step * np.arange(-4, 5)), step


def _refined(combined: DensityOfStates, quantity: Quantity, low: float, high: float) -> float:
    """Inverse temperature of the maximum between two grid points."""
    rough = minimize_scalar(
        lambda b: -float(values(combined, quantity, np.array([b]))[0]),
        bounds=(low, high),
        method="bounded",
        options={"xatol": 1e-6 * (high - low)},
    )
    beta = float(rough.x)
    for _ in range(3):
        points, step = _stencil(combined, beta)
        y = values(combined, quantity, points)
        slope, curvature = FIRST_DERIVATIVE @ y / step, SECOND_DERIVATIVE @ y / step**2
        if curvature >= 0:
            break
        beta = float(np.clip(beta - slope / curvature, low, high))
    return beta


def _peak(
    combined: DensityOfStates,
    quantity: Quantity,
    beta: float,
    valley: float,
    edge: bool,
    level: float,
    factor: float,
    unit: str,
    per: str | None,
) -> Peak:
    points, step = _stencil(combined, beta)
    (around,) = evaluate(combined, [quantity], np.append(points, valley))
    middle, last = 4, 9
    curvature = float(SECOND_DERIVATIVE @ around.value[:last] / step**2)
    k = combined.description.boltzmann_constant
    # dT = -dbeta / (k beta**2) and dbeta = -dy' / y''
    scale = 1 / (curvature * k * beta**2) if beta != 0 and curvature != 0 else np.nan
    blocks = [
        np.stack(
            [
                scale * (block[:, :last] @ FIRST_DERIVATIVE) / step,
                block[:, middle],
                block[:, middle] - block[:, last],
            ],
            axis=1,
        )
        for block in around.blocks
    ]
    if edge:  # no condition fixes the position
        for block in blocks:
            block[:, 0] = 0.0
    spread = variance(blocks)
    error = spread.standard_error
    half = half_width(error, spread.degrees_of_freedom, level)
    rise = float(around.value[middle] - around.value[last])
    prominence = rise / float(error[2]) if error[2] > 0 else (np.inf if rise > 0 else 0.0)
    temperature = float(combined.description.temperature(beta))
    height = float(around.value[middle]) * factor
    height_half = float(half[1]) * abs(factor)
    position_error, position_half = (np.nan, np.nan) if edge else (float(error[0]), float(half[0]))
    return Peak(
        of=quantity.name,
        temperature=temperature,
        temperature_standard_error=position_error,
        temperature_interval=(temperature - position_half, temperature + position_half),
        temperature_bias=None,
        height=height,
        height_standard_error=float(error[1]) * abs(factor),
        height_interval=(height - height_half, height + height_half),
        unit=unit,
        per=per,
        correlation=np.nan
        if edge
        else float(correlation([b[:, :2] for b in blocks], spread.windows[:, :2])[0, 1]),
        prominence=prominence,
        stands_out=bool(prominence >= STANDS_OUT and not edge),
        at_edge=edge,
        effective_sample_size=float(around.effective_sample_size[middle]),
        within_reach=bool(around.within_reach[middle]),
        variance_share={
            run.name: (float(spread.shares[i, 0]), float(spread.shares[i, 1]))
            for i, run in enumerate(combined.runs)
        },
    )
