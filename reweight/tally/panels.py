r"""Panels: continuous energies as moments on short intervals, exact for smooth functions.

Every formula of the estimator sums a smooth function of the energy over the samples.  On a panel
``[h m, h (m + 1))`` with the local coordinate ``t = 2 (E / h - m) - 1`` the sums ``S_j = sum_n T_j(t_n)``, ``j < p``, of
Chebyshev polynomials turn into weights on the Chebyshev nodes ``x_q = cos(pi (q + 1/2) / p)``::

    W_q = (1 / p) [S_0 + 2 sum_{j >= 1} T_j(x_q) S_j]

and ``sum_q W_q F(x_q)`` equals the sum over the samples for every polynomial ``F`` of degree below ``p``.  With the
width chosen here the functions that occur are such polynomials to about 1e-13.  Node weights may be negative and
mean nothing singly; only sums over whole panels do.

What is kept are the sums of the powers ``t**j``, j < p, from which the ``S_j`` follow with whole-number coefficients: they
cost three quarters of the time, and lose two digits only where the polynomials of high degree contribute 1e-10.

``h`` is a power of two, so that ``E / h``, its floor and the remainder are exact in floating point.

Shape letters: N samples, p order (nodes a panel), M panels.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from numpy.polynomial.chebyshev import cheb2poly
from numpy.typing import NDArray

from reweight.errors import InputError

__all__ = [
    "ORDER",
    "check_magnitude",
    "node_energies",
    "node_matrix",
    "nodes",
    "panel_indices",
    "panel_width",
    "powers",
]

ORDER = 8

# Beyond this the panel number is no longer exact in a double.
LARGEST_INDEX = 2.0**52


def panel_width(smallest_deviation: float, largest_gap: float, resolution: float | None = None) -> float:
    """Width of the panels: the largest power of two at which nothing measurable is neglected.

    Parameters
    ----------
    smallest_deviation : float
        Smallest non-zero standard deviation of the energy among the runs; 0 if every run is constant.
    largest_gap : float
        Largest difference between neighbouring inverse temperatures; 0 for a single temperature.  Guards against a
        deviation that was read off a transient.
    resolution : float, optional
        An upper bound asked for by the user, in energy units.
    """
    bounds = [1.0] if smallest_deviation == 0 else [smallest_deviation / 8]
    if largest_gap > 0:
        bounds.append(0.5 / largest_gap)
    if resolution is not None:
        bounds.append(resolution)
    return 2.0 ** math.floor(math.log2(min(bounds)))


def check_magnitude(lowest: float, highest: float, width: float) -> None:
    """Refuse energies so large against the width of the panels that these cannot be numbered exactly.

    Raises
    ------
    InputError
        As said.
    """
    if max(-lowest, highest) / width >= LARGEST_INDEX:
        worst = highest if highest > -lowest else lowest
        raise InputError(
            f"energies must be smaller than {LARGEST_INDEX * width:.3g}, given how little they fluctuate; "
            f"got {worst:.6g}. Check the unit, look for fill values, or subtract a constant from all energies."
        )


def panel_indices(
    energies: NDArray[np.float64], width: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Panel number of every energy (as exact floats) and its local coordinate in [-1, 1).

    Exact for energies that :func:`check_magnitude` lets pass.
    """
    scaled = energies * (1 / width)  # exact, as the division would be: the width is a power of two
    index = np.floor(scaled)
    scaled -= index
    scaled *= 2
    scaled -= 1
    return index, scaled


def powers(
    coordinate: NDArray[np.float64], order: int = ORDER, *, out: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Powers 0 .. order-1 of a coordinate, shape (order, N); into ``out``, whose first row is left as it is, if given."""
    values = np.ones((order, coordinate.size)) if out is None else out
    if order > 1:
        values[1] = coordinate
    for j in range(2, order):
        np.multiply(coordinate, values[j - 1], out=values[j])
    return values


def nodes(order: int = ORDER) -> NDArray[np.float64]:
    """Chebyshev nodes of one panel in [-1, 1], ascending, shape (order,)."""
    return -np.cos(np.pi * (np.arange(order) + 0.5) / order)


@cache
def node_matrix(order: int = ORDER) -> NDArray[np.float64]:
    """Matrix (order, order) that turns power sums ``S`` into node weights as ``S @ matrix``.

    Through the Chebyshev form above: the coefficients of ``T_j`` in powers are small whole numbers.
    """
    chebyshev = 2 * np.cos(np.arange(order)[:, None] * np.arccos(nodes(order))) / order
    chebyshev[0] /= 2
    coefficients = np.zeros((order, order))
    for j in range(order):
        coefficients[j, : j + 1] = cheb2poly(np.eye(j + 1)[j])
    matrix = coefficients.T @ chebyshev
    matrix.flags.writeable = False  # one for all
    return matrix


def node_energies(
    indices: NDArray[np.int64], width: float, reference_index: int, order: int = ORDER
) -> NDArray[np.float64]:
    """Energies of all nodes relative to ``width * reference_index``, shape (M * order,), ascending with the panels."""
    local = (nodes(order) + 1) / 2
    shifted = (indices - reference_index).astype(float)
    return np.asarray(width * (shifted[:, None] + local[None, :])).ravel()
