"""Draws from exact canonical distributions, with a prescribed correlation along the series.

The serial correlation comes from one Gaussian autoregression x_(t+1) = phi x_t + sqrt(1 - phi**2) z_t, whose
values are mapped to the wanted distribution by their rank: the distribution is exact for every phi.  The
statistical inefficiency of x is (1 + phi) / (1 - phi); a linear map (the Gaussian density of states) keeps it,
any other map has at most that (for phi >= 0): the n-th Hermite component of the map decays as phi**n.
Source of the autoregression: M. B. Priestley, Spectral Analysis and Time Series (1981) (from memory).

Everything takes ``series``: how many independent series are drawn at once, as rows; by default there is one
and the result has no such axis.  Units: k_B = 1.  Shape letters: S series, N draws a series, L levels.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.signal import lfilter
from scipy.special import gammaincinv, ndtr, ndtri, softmax

from reweight.datasets.exact_models import JointLevels

__all__ = ["correlated_normals", "draw_gamma", "draw_gaussian", "draw_joint", "draw_levels"]


def correlated_normals(
    count: int, coefficient: float, rng: np.random.Generator, *, series: int | None = None
) -> NDArray[np.float64]:
    """Stationary first-order autoregression of zero mean and unit variance.

    Parameters
    ----------
    count : int
        Draws a series, N.
    coefficient : float
        phi, correlation of neighbouring draws, above -1 and below 1.
    rng : numpy.random.Generator
    series : int, optional
        Number of independent series S; one without an axis of its own if not given.

    Returns
    -------
    numpy.ndarray, shape (N,) or (S, N)

    Raises
    ------
    ValueError
        The coefficient is not inside (-1, 1).
    """
    if not -1.0 < coefficient < 1.0:
        raise ValueError(f"coefficient must lie between -1 and 1; got {coefficient}. Use 0 for independence.")
    normals = rng.standard_normal(count if series is None else (series, count))
    if coefficient == 0.0:
        return normals
    # the first draw keeps its full variance: the series is stationary from the start
    normals[..., 1:] *= np.sqrt(1.0 - coefficient**2)
    return np.asarray(lfilter([1.0], [1.0, -coefficient], normals, axis=-1))


def draw_levels(
    energies: ArrayLike,
    log_degeneracies: ArrayLike,
    temperature: float,
    count: int,
    rng: np.random.Generator,
    *,
    coefficient: float = 0.0,
    series: int | None = None,
) -> NDArray[np.float64]:
    """Energies from the exact canonical distribution on a list of levels.

    Parameters
    ----------
    energies, log_degeneracies : array_like, shape (L,)
        Ascending energies make neighbouring draws correlate in energy.
    temperature : float
        Positive; infinity is allowed.
    count, rng, coefficient, series
        As in `correlated_normals`.

    Returns
    -------
    numpy.ndarray, shape (N,) or (S, N)

    Examples
    --------
    >>> draw_levels([0.0, 1.0], [0.0, 0.0], 0.1, 4, np.random.default_rng(1))
    array([0., 0., 0., 0.])
    """
    levels = np.asarray(energies, dtype=np.float64)
    normals = correlated_normals(count, coefficient, rng, series=series)
    return levels[_level_indices(levels, log_degeneracies, temperature, normals)]


def draw_joint(
    joint: JointLevels,
    temperature: float,
    count: int,
    rng: np.random.Generator,
    *,
    coefficient: float = 0.0,
    series: int | None = None,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Energies and an observable from their exact joint canonical distribution.

    Parameters
    ----------
    joint : JointLevels
        From `exact_models`.
    temperature : float
        Positive; infinity is allowed.
    count, rng, coefficient, series
        As in `correlated_normals`.

    Returns
    -------
    energies, observable : numpy.ndarray, shape (N,) or (S, N)
    """
    normals = correlated_normals(count, coefficient, rng, series=series)
    indices = _level_indices(joint.energies, joint.log_degeneracies, temperature, normals)
    return joint.energies[indices], joint.observable[indices]


def draw_gamma(
    shape: float,
    temperature: float,
    count: int,
    rng: np.random.Generator,
    *,
    coefficient: float = 0.0,
    series: int | None = None,
) -> NDArray[np.float64]:
    """Energies of 2 ``shape`` classical quadratic degrees of freedom: Gamma distributed.

    Parameters
    ----------
    shape : float
        Half the number of degrees of freedom; the heat capacity in units of k_B.
    temperature : float
        Positive and finite.
    count, rng, coefficient, series
        As in `correlated_normals`.

    Returns
    -------
    numpy.ndarray, shape (N,) or (S, N)
    """
    if coefficient == 0.0:  # the generator's own algorithm is many times faster than the inverse function
        return rng.gamma(shape, temperature, count if series is None else (series, count))
    ranks = ndtr(correlated_normals(count, coefficient, rng, series=series))
    return np.asarray(temperature * gammaincinv(shape, ranks))


def draw_gaussian(
    width: float,
    temperature: float,
    count: int,
    rng: np.random.Generator,
    *,
    coefficient: float = 0.0,
    series: int | None = None,
) -> NDArray[np.float64]:
    """Energies of a Gaussian density of states: mean -width**2 / T, standard deviation width.

    Parameters
    ----------
    width : float
        Standard deviation of the energies, at every temperature.
    temperature : float
        Positive; infinity is allowed.
    count, rng, coefficient, series
        As in `correlated_normals`; here the energies have exactly the inefficiency of the autoregression.

    Returns
    -------
    numpy.ndarray, shape (N,) or (S, N)
    """
    normals = correlated_normals(count, coefficient, rng, series=series)
    return width * normals - width**2 / temperature


def _level_indices(
    energies: ArrayLike, log_degeneracies: ArrayLike, temperature: float, normals: NDArray[np.float64]
) -> NDArray[np.intp]:
    """Level of each normal deviate with the same rank in its distribution."""
    log_weights = np.asarray(log_degeneracies, dtype=np.float64) - np.asarray(energies) / temperature
    cumulative = np.cumsum(softmax(log_weights))[:-1]
    # comparing with the few transformed limits saves transforming the many deviates
    return np.searchsorted(ndtri(np.minimum(cumulative, 1.0)), normals)
