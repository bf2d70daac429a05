r"""Free energies of the simulated temperatures, from their self-consistency condition.

Array layer: NumPy and SciPy only; knows nothing of xarray, files or units.

With ``W_q`` the weight of all runs' samples on node q, ``n_i`` the weight of run i and ``beta_i`` its inverse
temperature::

    D(E)  = sum_i n_i exp(f_i - beta_i E),      P_iq = n_i exp(f_i - beta_i E_q) / D(E_q)
    F(f)  = sum_q W_q ln D(E_q) - sum_i n_i f_i            (convex; its minimum is the solution)
    grad_i = sum_q W_q P_iq - n_i,   H = diag(P W) - (P W) P^T

Ferrenberg & Swendsen, Phys. Rev. Lett. 63, 1195 (1989); Kumar et al., J. Comput. Chem. 13, 1011 (1992); Shirts &
Chodera, J. Chem. Phys. 129, 124105 (2008) (references from memory).  Any positive weight per run is valid: the
gradient vanishes in expectation at the truth for every choice, only the efficiency depends on it.

Three decisions a reader will wonder about:

* Everything is kept as logarithms, relative to a reference energy.  A 32 x 32 lattice of two-state sites already has
  2**1024 configurations, one too many for a double.
* Newton's method starts from two-run solutions of neighbouring temperatures and stops by its decrement, the shift in
  units of standard errors.  A step size in f would be unreachable: rounding of beta E moves f by more than 1e-12.
* Runs whose energies do not overlap still have a solution, and its formal errors look small.  So the sharing across
  every cut between neighbouring temperatures is measured, before and after solving.

Shape letters: K runs, Q nodes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve
from scipy.special import expit

from reweight.errors import ConvergenceError
from reweight.products import COLUMNS, product
from reweight.tally.panels import ORDER

__all__ = ["Solution", "cut_sharing", "pairwise_start", "solution_at", "solve"]

Array = NDArray[np.float64]

LARGEST_STEP = 50.0
DECREMENT = 1e-6
MOST_STEPS = 100
START = 1e-2  # how well starting values are solved for; Newton does the rest
POOLED = 256  # nodes they are solved for on
LONGEST_SEARCH = 1e15
TINY = 1e-300


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Solution:
    """Dimensionless free energies of the runs and how they were found.

    Attributes
    ----------
    free_energies : numpy.ndarray, shape (K,)
        ``f_i = -ln Z_i`` up to a common constant, for energies relative to the reference; the reference run has 0.
    log_denominator : numpy.ndarray, shape (Q,)
        ``ln D`` at the nodes.
    probabilities : numpy.ndarray, shape (K, Q)
        ``P_iq``: probability that a sample at node q came from run i; columns sum to one.
    converged : bool
    iterations : int
        Newton steps.
    residual : float
        Last Newton decrement: distance from the solution in standard errors.
    """

    free_energies: Array
    log_denominator: Array
    probabilities: Array
    converged: bool
    iterations: int
    residual: float


def pairwise_start(weights: Array, counts: Array, beta: Array, energies: Array) -> Array:
    """Free energies chained from two-run solutions of neighbouring temperatures, by bracketed Newton steps.

    Parameters
    ----------
    weights : numpy.ndarray, shape (K, Q)
        Per run, in units of independent samples.
    counts, beta : numpy.ndarray, shape (K,)
    energies : numpy.ndarray, shape (Q,)
    """
    weights, energies = _pooled(weights, energies)
    order = np.argsort(beta, kind="stable")
    low, high = order[:-1], order[1:]
    pair, target = weights[low] + weights[high], counts[high]
    step = beta[high] - beta[low]
    offset = np.log(target / counts[low])[:, None] - step[:, None] * energies
    mean = weights @ energies / counts
    difference = step * 0.5 * (mean[low] + mean[high])
    below, above = np.full(step.size, -np.inf), np.full(step.size, np.inf)
    longest = 1.0
    while longest < LONGEST_SEARCH:
        share = expit(difference[:, None] + offset)
        excess = (pair * share).sum(axis=1) - target
        slope = (pair * share * (1 - share)).sum(axis=1)
        below, above = np.where(excess <= 0, difference, below), np.where(excess >= 0, difference, above)
        move = -excess / np.maximum(slope, np.abs(excess) / longest + TINY)
        moved = difference + move
        outside = (moved < below) | (moved > above)
        difference = np.where(outside, 0.5 * (below + above), moved)
        if np.abs(move).max(initial=0.0) < START:
            free = np.zeros(beta.size)
            free[high] = np.cumsum(difference)
            return free
        longest *= 2
    raise ConvergenceError(
        "energies of neighbouring runs must differ by less than double precision holds; these could not be joined. "
        "Look for fill values and check the unit."
    )


def _pooled(weights: Array, energies: Array) -> tuple[Array, Array]:
    """Neighbouring nodes as one: good enough for starting values.  Whole panels, since single nodes mean nothing."""
    group = ORDER * -(-energies.size // (ORDER * POOLED))
    if energies.size <= POOLED:
        return weights, energies
    starts = np.arange(0, energies.size, group)
    sizes = np.diff(np.append(starts, energies.size))
    return np.add.reduceat(weights, starts, axis=1), np.add.reduceat(energies, starts) / sizes


def _exponents(counts: Array, beta: Array, energies: Array) -> Array:
    return np.asarray(np.log(counts)[:, None] - beta[:, None] * energies[None, :])


def _state(exponents: Array, free: Array) -> tuple[Array, Array]:
    terms = exponents + free[:, None]
    highest = terms.max(axis=0)
    terms -= highest
    np.exp(terms, out=terms)
    total = terms.sum(axis=0)
    terms /= total
    return np.log(total) + highest, terms


def hessian(weights: Array, probabilities: Array) -> Array:
    """Second derivative of the objective, shape (K, K); rows sum to zero."""
    weighted = probabilities * weights
    return np.asarray(np.diag(weighted.sum(axis=1)) - product(weighted, probabilities.T))


def solve_reduced(matrix: Array, right: Array, reference: int) -> Array:
    """Solve ``matrix x = right`` with ``x[reference] = 0``; the matrix is singular along the constant vector.

    Parameters
    ----------
    matrix : numpy.ndarray, shape (K, K)
    right : numpy.ndarray, shape (K,) or (K, R)
    """
    keep = np.arange(matrix.shape[0]) != reference
    solution = np.zeros_like(right)
    if keep.any():
        block = matrix[np.ix_(keep, keep)]
        diagonal = np.diag(block)
        if not (diagonal > 0).all():
            raise np.linalg.LinAlgError("a run shares no energies with any other")
        scale = 1 / np.sqrt(diagonal)
        scaled = block * scale * scale[:, None]
        factor = cho_factor(scaled)
        if right.ndim == 1:
            solution[keep] = scale * cho_solve(factor, scale * right[keep])
            return solution
        for start in range(0, right.shape[1], COLUMNS):
            sides = right[keep, start : start + COLUMNS]
            solution[keep, start : start + COLUMNS] = scale[:, None] * cho_solve(
                factor, scale[:, None] * sides
            )
    return solution


def reference_run(counts: Array) -> int:
    """Run whose free energy is fixed at zero: the heaviest one."""
    return int(np.argmax(counts))


def solve(
    weights: Array, counts: Array, beta: Array, energies: Array, start: Array | None = None
) -> Solution:
    """Damped Newton minimisation of the convex objective.

    Parameters
    ----------
    weights : numpy.ndarray, shape (Q,)
        Of all runs together.
    counts, beta : numpy.ndarray, shape (K,)
    energies : numpy.ndarray, shape (Q,)
        Relative to a reference in the middle of the data.
    start : numpy.ndarray, shape (K,), optional

    Raises
    ------
    ConvergenceError
        No convergence in 100 steps.
    """
    reference = reference_run(counts)
    free = np.zeros(beta.size) if start is None else start - start[reference]
    exponents = _exponents(counts, beta, energies)

    def objective(log_denominator: Array, free: Array) -> float:
        return float(weights @ log_denominator - counts @ free)

    log_denominator, probabilities = _state(exponents, free)
    value = objective(log_denominator, free)
    residual = 0.0
    for iteration in range(MOST_STEPS):
        gradient = probabilities @ weights - counts
        try:
            step = -solve_reduced(hessian(weights, probabilities), gradient, reference)
        except np.linalg.LinAlgError:
            raise ConvergenceError(
                "the equations for the free energies are singular: some runs share no energies. "
                "Add runs between them, or leave some out."
            ) from None
        squared = float(-gradient @ step)
        residual = float(np.sqrt(max(squared, 0.0)))
        last = residual < DECREMENT
        longest = float(np.abs(step).max())
        if longest > LARGEST_STEP:
            step *= LARGEST_STEP / longest
            squared *= LARGEST_STEP / longest  # slope along the shortened step
        size = 1.0
        while True:
            candidate = free + size * step
            new_denominator, new_probabilities = _state(exponents, candidate)
            new_value = objective(new_denominator, candidate)
            if last or new_value <= value - 1e-4 * size * squared + 1e-13 * abs(value) or size < 1e-10:
                break
            size /= 2
        free, log_denominator, probabilities, value = candidate, new_denominator, new_probabilities, new_value
        if last:
            return Solution(
                free_energies=free,
                log_denominator=log_denominator,
                probabilities=probabilities,
                converged=True,
                iterations=iteration + 1,
                residual=residual,
            )
    raise ConvergenceError(
        f"the free energies did not converge in {MOST_STEPS} steps; the last one moved them by {residual:.2g} standard "
        "errors. The runs may hardly overlap: check their energies and temperatures."
    )


def solution_at(
    free: Array, counts: Array, beta: Array, energies: Array, *, iterations: int, residual: float
) -> Solution:
    """Solution with known free energies, bit for bit as :func:`solve` returned it."""
    log_denominator, probabilities = _state(_exponents(counts, beta, energies), free)
    return Solution(
        free_energies=free,
        log_denominator=log_denominator,
        probabilities=probabilities,
        converged=True,
        iterations=iterations,
        residual=residual,
    )


def cut_sharing(weights: Array, probabilities: Array, beta: Array) -> Array:
    """Independent samples' worth of sharing across every cut between neighbouring temperatures, shape (K - 1,).

    For the cut between the k-th and the next inverse temperature (ascending), with ``P_L`` the probability that a
    sample came from the low side: ``c_k = sum_q W_q P_L (1 - P_L)``.  ``1 / sqrt(c_k)`` is about the standard error of
    the free-energy step across the cut.
    """
    low = np.cumsum(probabilities[np.argsort(beta, kind="stable")], axis=0)[:-1]
    return np.asarray((low * (1 - low)) @ weights)
