r"""Panels: continuous energies as Chebyshev moments on short intervals, exact for smooth functions.

Every formula of the estimator sums a smooth function of the energy over the samples.  On a panel
``[h m, h (m + 1))`` with the local coordinate ``t = 2 (E / h - m) - 1`` the sums ``S_j = sum_n T_j(t_n)``, ``j < p``,
turn into weights on the Chebyshev nodes ``x_q = cos(pi (q + 1/2) / p)``::

    W_q = (1 / p) [S_0 + 2 sum_{j >= 1} T_j(x_q) S_j]

and ``sum_q W_q F(x_q)`` equals the sum over the samples for every polynomial ``F`` of degree below ``p``.  With the
width chosen here the functions that occur are such polynomials to about 1e-13.  Node weights may be negative and
mean nothing singly; only sums over whole panels do.

``h`` is a power of two, so that ``E / h``, its floor and the remainder are exact in floating point.

Shape letters: N samples, p order (nodes a panel), M panels.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from reweight.errors import InputError

__all__ = ["ORDER", "chebyshev_values", "node_energies", "node_matrix", "panel_indices", "panel_width"]

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


def panel_indices(
    energies: NDArray[np.float64], width: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Panel number of every energy (as exact floats) and its local coordinate in [-1, 1).

    Raises
    ------
    InputError
        An energy is so large against the width that its panel cannot be numbered exactly.
    """
    scaled = energies / width
    index = np.floor(scaled)
    if index.size and max(-index.min(), index.max()) >= LARGEST_INDEX:
        worst = float(energies[np.argmax(np.abs(energies))])
        raise InputError(
            f"energies must be smaller than {LARGEST_INDEX * width:.3g}, given how little they fluctuate; got {worst:.6g}. "
            "Check the unit, or subtract a constant from all energies."
        )
    scaled -= index
    scaled *= 2
    scaled -= 1
    return index, scaled


def chebyshev_values(
    coordinate: NDArray[np.float64], order: int = ORDER, *, out: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Chebyshev polynomials T_0 .. T_{order-1} of a coordinate, shape (order, N); into ``out`` if given."""
    values = np.empty((order, coordinate.size)) if out is None else out
    values[0] = 1
    if order > 1:
        values[1] = coordinate
    doubled = 2 * coordinate
    for j in range(2, order):
        np.multiply(doubled, values[j - 1], out=values[j])
        values[j] -= values[j - 2]
    return values


def nodes(order: int = ORDER) -> NDArray[np.float64]:
    """Chebyshev nodes of one panel in [-1, 1], ascending, shape (order,)."""
    return -np.cos(np.pi * (np.arange(order) + 0.5) / order)


def node_matrix(order: int = ORDER) -> NDArray[np.float64]:
    """Matrix (order, order) that turns Chebyshev sums ``S`` into node weights as ``S @ matrix``."""
    matrix = 2 * chebyshev_values(nodes(order), order) / order
    matrix[0] /= 2
    return matrix


def node_energies(
    indices: NDArray[np.int64], width: float, reference_index: int, order: int = ORDER
) -> NDArray[np.float64]:
    """Energies of all nodes relative to ``width * reference_index``, shape (M * order,), ascending with the panels."""
    local = (nodes(order) + 1) / 2
    shifted = (indices - reference_index).astype(float)
    return np.asarray(width * (shifted[:, None] + local[None, :])).ravel()
