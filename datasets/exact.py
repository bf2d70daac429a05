"""Exact densities of states of the square lattice, and exact averages of any list of levels.

Independent judges for everything estimated from samples.  Units: k_B = 1 and J = 1; shape letter: L levels,
T temperatures.

The square lattice has length x length sites s = +1 or -1, periodic both ways, E = -(sum over neighbouring
pairs of s s'), N = length**2 sites and levels E_k = -2 N + 4 k, k = 0..N.  Kaufman's product formula gives its
partition function.  Written in x = exp(-2 K), K = 1/T, and freed of denominators it is a polynomial,

    sum_k g_k x**(2 k) = 2**(-N/2 - 1) (Q1 + Q2 + Q3 + Q4),

whose factors need cos(pi l / length) and nothing else that is irrational.  Modulo a prime p with a suitable
root of unity that cosine is an integer, so the polynomial is evaluated exactly at N + 1 points, transformed
back to its coefficients modulo p, and the remainders for enough primes are joined to the full integers.
Nothing is ever rounded.

Sources: B. Kaufman, Phys. Rev. 76, 1232 (1949); L. Onsager, Phys. Rev. 65, 117 (1944); the wish for exact
integers: P. D. Beale, Phys. Rev. Lett. 76, 78 (1996) (all cited from memory).
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq, minimize_scalar
from scipy.special import logsumexp

__all__ = [
    "Canonical",
    "canonical",
    "canonical_mean",
    "heat_capacity_peak",
    "lattice_degeneracies",
    "lattice_log_degeneracies",
]

LARGEST_PRIME = 2**31  # products of two remainders then fit a signed 64-bit integer


@cache
def lattice_degeneracies(length: int) -> tuple[int, ...]:
    """Numbers of states of the square lattice on all its levels, as exact integers.

    Parameters
    ----------
    length : int
        Sites along one side, at least 3 (below, two sites would share two bonds).

    Returns
    -------
    tuple of int, length N + 1
        ``g[k]`` counts the states with energy ``-2 N + 4 k``, N = length**2; some are zero.

    Raises
    ------
    ValueError
        The length is below 3.

    Examples
    --------
    >>> lattice_degeneracies(4)[:6]
    (2, 0, 32, 64, 424, 1728)
    """
    if length < 3:
        raise ValueError(
            f"length must be at least 3 sites; got {length}. Enumerate smaller lattices by hand."
        )
    site_count = length**2
    point_count = site_count + 1
    order = math.lcm(2 * length, 2 * point_count)
    residues: list[int] = [0] * point_count
    modulus = 1
    for prime in _primes_with_root_of_unity(order):
        root = _root_of_unity(order, prime)
        remainders = _degeneracies_modulo(length, prime, root, order).tolist()
        inverse = pow(modulus, -1, prime)
        residues = [
            residue + modulus * ((remainder - residue) * inverse % prime)
            for residue, remainder in zip(residues, remainders, strict=True)
        ]
        modulus *= prime
        if modulus > 2**site_count:  # no count can be larger than the number of states
            return tuple(residues)
    raise ValueError(f"length must leave enough primes below 2**31; got {length}. Ask for a smaller lattice.")


def lattice_log_degeneracies(length: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Levels of the square lattice that occur, and the logarithms of their numbers of states.

    Parameters
    ----------
    length : int
        Sites along one side, at least 3.

    Returns
    -------
    energies : numpy.ndarray, shape (L,)
        Ascending, in units of J; levels without states are left out.
    log_degeneracies : numpy.ndarray, shape (L,)
        Natural logarithms of the exact integers.
    """
    degeneracies = lattice_degeneracies(length)
    occupied = [level for level, degeneracy in enumerate(degeneracies) if degeneracy]
    energies = np.array([4.0 * level - 2.0 * length**2 for level in occupied])
    return energies, np.array([math.log(degeneracies[level]) for level in occupied])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Canonical:
    """Exact canonical averages.

    Attributes
    ----------
    temperatures : numpy.ndarray, shape (T,)
    log_partition : numpy.ndarray, shape (T,)
        ln Z.
    mean_energy : numpy.ndarray, shape (T,)
    heat_capacity : numpy.ndarray, shape (T,)
        In units of k_B, for the whole system.
    """

    temperatures: NDArray[np.float64]
    log_partition: NDArray[np.float64]
    mean_energy: NDArray[np.float64]
    heat_capacity: NDArray[np.float64]


def canonical(energies: ArrayLike, log_degeneracies: ArrayLike, temperatures: ArrayLike) -> Canonical:
    """Sum a list of levels exactly at given temperatures.

    Parameters
    ----------
    energies, log_degeneracies : array_like, shape (L,)
    temperatures : float or array_like, shape (T,)
        Positive; infinity is allowed.

    Returns
    -------
    Canonical
        Always with arrays of shape (T,), T = 1 for a single temperature.

    Examples
    --------
    >>> float(canonical([0.0, 1.0], [0.0, 0.0], 1.0).mean_energy[0])
    0.2689414213699951
    """
    levels = np.asarray(energies, dtype=np.float64)
    asked = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    log_weights = np.asarray(log_degeneracies, dtype=np.float64) - levels / asked[:, None]
    log_partition = np.asarray(logsumexp(log_weights, axis=1))
    probabilities = np.exp(log_weights - log_partition[:, None])
    mean_energy = probabilities @ levels
    # centred before squaring: the difference of two large averages would lose its digits
    variance = np.sum(probabilities * (levels - mean_energy[:, None]) ** 2, axis=1)
    return Canonical(
        temperatures=asked,
        log_partition=log_partition,
        mean_energy=mean_energy,
        heat_capacity=variance / asked**2,
    )


def canonical_mean(
    energies: ArrayLike, log_degeneracies: ArrayLike, values: ArrayLike, temperatures: ArrayLike
) -> NDArray[np.float64]:
    """Exact canonical mean of a quantity that is known on every level.

    Parameters
    ----------
    energies, log_degeneracies, values : array_like, shape (L,)
        A level may be listed several times with different values (see the joint counts of `exact_models`).
    temperatures : float or array_like, shape (T,)

    Returns
    -------
    numpy.ndarray, shape (T,)
    """
    levels = np.asarray(energies, dtype=np.float64)
    asked = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    log_weights = np.asarray(log_degeneracies, dtype=np.float64) - levels / asked[:, None]
    probabilities = np.exp(log_weights - np.asarray(logsumexp(log_weights, axis=1))[:, None])
    return np.asarray(probabilities @ np.asarray(values, dtype=np.float64))


def heat_capacity_peak(
    energies: ArrayLike, log_degeneracies: ArrayLike, lowest: float, highest: float
) -> tuple[float, float]:
    """Find the maximum of the heat capacity between two temperatures.

    Parameters
    ----------
    energies, log_degeneracies : array_like, shape (L,)
    lowest, highest : float
        The interval must hold one maximum and not have it at an end.

    Returns
    -------
    temperature : float
        Accurate to about 1e-10: the root of the slope, since the height itself is flat there.
    height : float
        In units of k_B, for the whole system.
    """
    levels = np.asarray(energies, dtype=np.float64)
    logs = np.asarray(log_degeneracies, dtype=np.float64)

    def slope(temperature: float) -> float:
        """T**2 dC/dT, from the third central moment m3: T**4 C' = m3 - 2 T m2."""
        log_weights = logs - levels / temperature
        probabilities = np.exp(log_weights - logsumexp(log_weights))
        deviations = levels - probabilities @ levels
        second = float(probabilities @ deviations**2)
        return (float(probabilities @ deviations**3) / temperature - 2.0 * second) / temperature

    rough = minimize_scalar(
        lambda temperature: -float(canonical(levels, logs, temperature).heat_capacity[0]),
        bounds=(lowest, highest),
        method="bounded",
        options={"xatol": 1e-5 * (highest - lowest)},
    ).x
    step = 1e-3 * (highest - lowest)
    temperature = float(brentq(slope, max(rough - step, lowest), min(rough + step, highest), xtol=1e-14))
    return temperature, float(canonical(levels, logs, temperature).heat_capacity[0])


def _degeneracies_modulo(length: int, prime: int, root: int, order: int) -> NDArray[np.int64]:
    """Coefficients of Kaufman's polynomial modulo one prime, shape (N + 1,)."""
    point_count = length**2 + 1
    powers = _powers(root, order, prime)  # all powers of the root of unity
    step = order // (2 * point_count)
    x = powers[np.arange(point_count) * step]  # x**2 then runs through all (N + 1)-th roots of unity
    values = _kaufman_values(length, x, powers, prime)
    rows = np.arange(point_count)
    coefficients = np.empty(point_count, dtype=np.int64)
    for degree in range(point_count):
        backward = powers[(-2 * step * degree * rows) % order]
        coefficients[degree] = np.sum(values * backward % prime) % prime
    return np.asarray(coefficients * pow(point_count, -1, prime) % prime)


def _kaufman_values(
    length: int, x: NDArray[np.int64], powers: NDArray[np.int64], prime: int
) -> NDArray[np.int64]:
    """Kaufman's four products at points x, modulo a prime; each factor times b**(length / 2).

    With b = 2 x (1 - x**2) and P = (1 + x**2)**2 - b cos(pi l / length), cosh(g_l) = P / b.  g_l and
    g_(2 length - l) are equal and their two factors are taken together, (2 cosh(m g / 2))**2 = 2 cosh(m g) + 2,
    which needs no root; g_0 and g_length stand alone and are known in closed form,
    exp(g_0) = (1 - x) / (x (1 + x)) and exp(g_length) = (1 + x) / (x (1 - x)).
    """
    order = powers.size
    half = pow(2, -1, prime)
    square = x * x % prime
    b = 2 * x % prime * ((1 - square) % prime) % prime
    b_square = b * b % prime
    b_power = _elementwise_power(b, length, prime)
    centre = (1 + square) ** 2 % prime

    def pair_of_factors(index: int) -> NDArray[np.int64]:
        """b**length times 2 cosh(length g_l), by the recurrence of the Chebyshev polynomials."""
        turn = order // (2 * length) * index
        cosine = int(powers[turn % order] + powers[-turn % order]) * half % prime
        argument = 2 * (centre - b * cosine) % prime
        before, now = np.full_like(x, 2), argument
        for _ in range(length - 1):
            before, now = now, (argument * now - b_square * before % prime) % prime
        return np.asarray(now)

    def lone_factor(sign: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Growing and decaying half of the factor of g_length (sign +1) or g_0 (sign -1)."""
        growing = _elementwise_power((1 + sign * x) % prime, length, prime)
        decaying = _elementwise_power(x * ((1 - sign * x) % prime) % prime, length, prime)
        return growing, decaying

    total = np.zeros_like(x)
    for parity in (1, 0):
        pairs = [pair_of_factors(index) for index in range(1, length) if index % 2 == parity]
        lone = [lone_factor(1)] if length % 2 == parity else []
        if parity == 0:
            lone.append(lone_factor(-1))
        for sign in (1, -1):
            product = np.ones_like(x)
            for pair in pairs:
                product = product * ((pair + sign * 2 * b_power) % prime) % prime
            for growing, decaying in lone:
                product = product * ((growing + sign * decaying) % prime) % prime
            exponent = (len(lone) * length - length**2) // 2 - 1  # a lone factor carries 2**(length / 2)
            total = (total + product * pow(2, exponent, prime)) % prime
    return total


def _primes_with_root_of_unity(order: int) -> Iterator[int]:
    """Primes p below 2**31 with p - 1 divisible by the order, largest first."""
    sieve = np.ones(math.isqrt(LARGEST_PRIME) + 1, dtype=bool)
    sieve[:2] = False
    for number in range(2, math.isqrt(sieve.size) + 1):
        sieve[number * number :: number] = False
    divisors = np.flatnonzero(sieve)
    for multiple in range((LARGEST_PRIME - 1) // order, 0, -1):
        candidate = multiple * order + 1
        if np.all(candidate % divisors[divisors <= math.isqrt(candidate)]):
            yield candidate


def _root_of_unity(order: int, prime: int) -> int:
    """Return an element whose order modulo the prime is exactly the one asked for."""
    proper = [order // factor for factor in range(2, order + 1) if order % factor == 0]
    base = 2
    while True:
        root = pow(base, (prime - 1) // order, prime)
        if all(pow(root, divisor, prime) != 1 for divisor in proper):
            return root
        base += 1


def _powers(root: int, count: int, prime: int) -> NDArray[np.int64]:
    """root**0 .. root**(count - 1) modulo a prime."""
    powers = [1]
    for _ in range(count - 1):
        powers.append(powers[-1] * root % prime)
    return np.array(powers, dtype=np.int64)


def _elementwise_power(base: NDArray[np.int64], exponent: int, prime: int) -> NDArray[np.int64]:
    """base**exponent modulo a prime, elementwise, for small exponents."""
    result = np.ones_like(base)
    for _ in range(exponent):
        result = result * base % prime
    return result
