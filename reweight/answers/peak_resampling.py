"""Peaks found again in every resample: bias, correlation of position and height, competing maxima.

Every maximum of the full estimate owns the stretch of the search grid between the valleys beside it.  In a resample the
highest point of that stretch, refined by a polynomial through five grid points, is the maximum; it is lost where the
stretch rises to its very end.  The full estimate's own maxima are refined in the same way before they are compared.

Shape letters: R resamples, G grid points, P maxima.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

__all__ = ["FoundAgain", "find_again"]

Array = NDArray[np.float64]

NEWTON_STEPS = 6


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FoundAgain:
    """One maximum in every resample.

    Attributes
    ----------
    beta, height : numpy.ndarray, shape (R,)
        Where it is and how high; NaN where it is lost.
    full_beta, full_height : float
        Of the full estimate, refined in the same way.
    highest_share : float
        Share of the resamples in which no other maximum is higher.
    """

    beta: Array
    height: Array
    full_beta: float
    full_height: float
    highest_share: float


def find_again(grid: Array, full: Array, resampled: Array, places: Sequence[int]) -> list[FoundAgain]:
    """Find maxima of the full estimate in every resample.

    Parameters
    ----------
    grid : numpy.ndarray, shape (G,)
        Inverse temperatures, ascending; at least five.
    full : numpy.ndarray, shape (G,)
        The curve.
    resampled : numpy.ndarray, shape (R, G)
        The same in every resample; NaN where one has no solution.
    places : sequence of int, length P
        Interior maxima of the full curve, ascending.
    """
    valleys = [low + int(np.argmin(full[low:high])) for low, high in pairwise(places)]
    ends = [0, *valleys, grid.size - 1]
    found = []
    for place, (low, high) in zip(places, pairwise(ends), strict=True):
        curves = np.where(np.isnan(resampled[:, low : high + 1]), -np.inf, resampled[:, low : high + 1])
        at = low + np.argmax(curves, axis=1)
        beta, height = _refined(grid, resampled, at)
        lost = (at == low) | (at == high) | np.isnan(height)
        full_beta, full_height = _refined(grid, full[None, :], np.array([place]))
        found.append(
            (np.where(lost, np.nan, beta), np.where(lost, np.nan, height), full_beta[0], full_height[0])
        )
    heights = np.where(np.isnan([each[1] for each in found]), -np.inf, [each[1] for each in found])
    solved = np.isfinite(resampled[:, 0])
    highest = (heights == heights.max(axis=0)) & np.isfinite(heights)
    return [
        FoundAgain(
            beta=beta,
            height=height,
            full_beta=float(full_beta),
            full_height=float(full_height),
            highest_share=float(here[solved].mean()),
        )
        for (beta, height, full_beta, full_height), here in zip(found, highest, strict=True)
    ]


def _refined(grid: Array, curves: Array, places: NDArray[np.intp]) -> tuple[Array, Array]:
    """Maximum beside a grid point of each curve, by a polynomial through five points, shape (R,) each."""
    beta, height = np.empty(places.size), np.empty(places.size)
    for place in np.unique(places):
        here = np.flatnonzero(places == place)
        centre = int(np.clip(place, 2, grid.size - 3))
        near = slice(centre - 2, centre + 3)
        scale = (grid[centre + 1] - grid[centre - 1]) / 2
        local = (grid[near] - grid[centre]) / scale
        powers = np.vander(local, increasing=True)
        coefficients = np.asarray(np.linalg.solve(powers, curves[here, near].T), dtype=np.float64)
        first = coefficients[1:] * np.arange(1.0, 5)[:, None]
        second = first[1:] * np.arange(1.0, 4)[:, None]
        start = local[place - centre + 2]
        low, high = (
            (grid[np.clip(place + step, 0, grid.size - 1)] - grid[centre]) / scale for step in (-1, 1)
        )
        at = np.full(here.size, start)
        for _ in range(NEWTON_STEPS):
            slope, curvature = _value(at, first), _value(at, second)
            step = np.divide(-slope, curvature, out=np.zeros_like(slope), where=curvature < 0)
            at = np.clip(at + step, low, high)
        beta[here] = grid[centre] + scale * at
        height[here] = _value(at, coefficients)
    return beta, height


def _value(at: Array, coefficients: Array) -> Array:
    """Polynomials, one a column, each at its own point."""
    return np.asarray(np.polynomial.polynomial.polyval(at, coefficients, tensor=False))
