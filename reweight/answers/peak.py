r"""Peaks of any quantity: where, how high, how well known, and whether they stand out from their noise.

A maximum of ``y(beta)`` satisfies ``y' = 0``.  Its position moves by ``-I_{y'} / y''`` and its height by ``I_y`` when a
sample is added, with I the influence functions; derivatives are linear in y, so the block sums of ``y'`` are the same
differences of block sums.

Position and height do not depend on whether the curve is drawn against temperature or inverse temperature.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from reweight.answers.evaluate import evaluate, values
from reweight.answers.peak_resampling import FoundAgain, find_again
from reweight.answers.presentation import Presentation, presentation
from reweight.answers.resamples import resampled_on
from reweight.answers.search import FIRST_DERIVATIVE, SECOND_DERIVATIVE, search_grid, search_limits, stencil
from reweight.density_of_states import DensityOfStates
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.intervals import check_level, half_width, rescaled_interval
from reweight.uncertainty.resampling import Resamples
from reweight.uncertainty.window import Variance, correlation, variance

__all__ = ["Peak", "peaks"]

Array = NDArray[np.float64]

# Among the several independent maxima that noise draws, three standard errors are passed in less than about 1 %.
STANDS_OUT = 3.0

FEWEST_FOUND = 20  # resamples with a maximum, for a bias to be told


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
        Known only from resampling, as the next bias and share.
    height, height_standard_error : float
    height_interval : tuple of float
    height_bias : float or None
    unit : str
        Of the height.
    per : str or None
        What the height is per.
    correlation : float
        Of the errors of position and height; from the resamples, if there are any.
    highest_share : float or None
        Share of the resamples in which no other maximum is higher: how surely this is the highest.
    found_share : float or None
        Share of the resamples that have a maximum here at all.
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
    height_bias: float | None
    unit: str
    per: str | None
    correlation: float
    highest_share: float | None
    found_share: float | None
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
    resamples: Resamples | None = None,
    resampled_intervals: bool = False,
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
    resamples : Resamples, optional
        From :func:`reweight.draw_resamples`: the peak is found again in each of them.
    resampled_intervals : bool
        Give intervals the shape of the resamples, too.

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
    cold, hot = search_limits(combined, quantity, lowest, highest, beyond_reach=beyond_reach, sought="peak")
    grid = search_grid(combined, hot, cold)
    heights = values(combined, quantity, grid)
    places = _maxima(heights)
    again = {}
    interior = [place for place in places if place not in (0, grid.size - 1)]
    if resamples is not None and interior:
        (drawn,) = resampled_on(combined, resamples, [quantity], grid)
        again = dict(zip(interior, find_again(grid, heights, drawn, interior), strict=True))
    found = []
    for place in places:
        edge = place in (0, grid.size - 1)
        beta = float(grid[place]) if edge else _refined(combined, quantity, grid[place - 1], grid[place + 1])
        valley = float(grid[_key_valley(heights, place)])
        spread, peak = _peak(combined, quantity, beta, valley, edge, level, shown)
        if place in again:
            peak = _with_resamples(
                combined, peak, spread, again[place], level, shown.factor, resampled_intervals
            )
        found.append(peak)
    return tuple(sorted(found, key=lambda peak: -peak.prominence))


def _with_resamples(
    combined: DensityOfStates,
    peak: Peak,
    spread: Variance,
    again: FoundAgain,
    level: float,
    factor: float,
    intervals: bool,
) -> Peak:
    """Add what resampling says."""
    seen = np.isfinite(again.beta)
    if seen.sum() < FEWEST_FOUND:
        return replace(peak, highest_share=again.highest_share, found_share=float(seen.mean()))
    moved = np.stack(
        [
            combined.description.temperature(again.beta[seen])
            - float(combined.description.temperature(again.full_beta)),
            (again.height[seen] - again.full_height) * factor,
        ],
        axis=1,
    )
    bias = moved.mean(axis=0)
    varies = bool((np.ptp(moved, axis=0) > 0).all())
    peak = replace(
        peak,
        temperature_bias=float(bias[0]),
        height_bias=float(bias[1]),
        correlation=float(np.corrcoef(moved[:, 0], moved[:, 1])[0, 1]) if varies else np.nan,
        highest_share=again.highest_share,
        found_share=float(seen.mean()),
    )
    if not intervals:
        return peak
    value = np.array([peak.temperature, peak.height])
    error = np.array([peak.temperature_standard_error, peak.height_standard_error])
    ends = rescaled_interval(value, value + moved, error, spread.degrees_of_freedom[:2], level)
    return replace(
        peak,
        temperature_interval=(float(ends[0, 0]), float(ends[0, 1])),
        height_interval=(float(ends[1, 0]), float(ends[1, 1])),
    )


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
        points, step = stencil(combined, beta)
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
    shown: Presentation,
) -> tuple[Variance, Peak]:
    factor = shown.factor
    points, step = stencil(combined, beta)
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
    coupled = combined.description.exchange
    spread = variance(blocks, coupled=coupled)
    error = spread.standard_error
    half = half_width(error, spread.degrees_of_freedom, level)
    rise = float(around.value[middle] - around.value[last])
    prominence = rise / float(error[2]) if error[2] > 0 else (np.inf if rise > 0 else 0.0)
    temperature = float(combined.description.temperature(beta))
    height = float(around.value[middle]) * factor
    height_half = float(half[1]) * abs(factor)
    position_error, position_half = (np.nan, np.nan) if edge else (float(error[0]), float(half[0]))
    return spread, Peak(
        of=quantity.name,
        temperature=temperature,
        temperature_standard_error=position_error,
        temperature_interval=(temperature - position_half, temperature + position_half),
        temperature_bias=None,
        height=height,
        height_standard_error=float(error[1]) * abs(factor),
        height_interval=(height - height_half, height + height_half),
        height_bias=None,
        unit=shown.unit,
        per=shown.per,
        correlation=np.nan
        if edge
        else float(correlation([b[:, :2] for b in blocks], spread.windows[:, :2], coupled=coupled)[0, 1]),
        highest_share=None,
        found_share=None,
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
