"""The solver against its own definition: zero gradient, second derivatives by differences, sharing between runs.

Formulas: header of reweight/multistate.py.  Everything here works on plain weights on a grid of energies.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import logsumexp

import reweight as rw
from reweight.errors import ConvergenceError
from reweight.multistate import (
    START,
    cut_sharing,
    hessian,
    pairwise_start,
    reference_run,
    solution_at,
    solve,
    solve_reduced,
)

Problem = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def problem(runs: int = 5, spacing: float = 1.5, samples: int = 400, seed: int = 1) -> Problem:
    """Weights (K, Q), counts, inverse temperatures and energies of runs with Gaussian energies of width 5."""
    beta = 1.0 - spacing / 5 * np.arange(runs)
    counts = np.resize([1.0, 0.5, 1.7, 0.8, 2.0], runs) * samples
    rng = np.random.default_rng(seed)
    drawn = [np.rint(rng.normal(-25 * b, 5, int(n))) for b, n in zip(beta, counts, strict=True)]
    energies = np.unique(np.concatenate(drawn))
    weights = np.array([[np.count_nonzero(run == e) for e in energies] for run in drawn], float)
    return weights, counts, beta, energies + np.rint(25 * beta.mean())


def objective(
    free: np.ndarray, weights: np.ndarray, counts: np.ndarray, beta: np.ndarray, energies: np.ndarray
) -> float:
    log_denominator = logsumexp(np.log(counts)[:, None] + free[:, None] - np.outer(beta, energies), axis=0)
    return float(weights.sum(axis=0) @ log_denominator - counts @ free)


@pytest.mark.parametrize("spacing", [0.3, 1.5, 3.5])
@pytest.mark.parametrize("runs", [2, 5, 20])
def test_the_gradient_vanishes_at_the_solution(runs: int, spacing: float) -> None:
    weights, counts, beta, energies = problem(runs, spacing)
    solution = solve(
        weights.sum(axis=0), counts, beta, energies, pairwise_start(weights, counts, beta, energies)
    )

    gradient = solution.probabilities @ weights.sum(axis=0) - counts
    np.testing.assert_allclose(gradient, 0, atol=1e-10 * counts.sum())
    np.testing.assert_allclose(solution.probabilities.sum(axis=0), 1, rtol=1e-11)
    assert solution.converged
    assert solution.residual < 1e-6
    assert solution.free_energies[reference_run(counts)] == 0


def test_the_solution_is_the_minimum_of_the_objective() -> None:
    weights, counts, beta, energies = problem()
    free = solve(weights.sum(axis=0), counts, beta, energies).free_energies
    lowest = objective(free, weights, counts, beta, energies)

    rng = np.random.default_rng(2)
    for size in (1e-3, 1e-1, 1.0):
        away = free + size * rng.standard_normal(free.size)
        assert objective(away, weights, counts, beta, energies) > lowest


def test_the_hessian_agrees_with_finite_differences_of_the_objective() -> None:
    weights, counts, beta, energies = problem(4)
    free = np.array([0.3, -0.2, 0.1, 0.0]) + solve(weights.sum(axis=0), counts, beta, energies).free_energies
    at = solution_at(free, counts, beta, energies, iterations=0, residual=0.0)

    step = 1e-3
    numerical = np.empty((4, 4))
    unit = step * np.eye(4)
    for i in range(4):
        for j in range(4):
            corners = [
                objective(free + a * unit[i] + b * unit[j], weights, counts, beta, energies)
                for a, b in ((1, 1), (1, -1), (-1, 1), (-1, -1))
            ]
            numerical[i, j] = (corners[0] - corners[1] - corners[2] + corners[3]) / (4 * step**2)

    exact = hessian(weights.sum(axis=0), at.probabilities)
    # second differences: relative error step**2 / 6 and rounding 1e-16 * |F| / step**2, both near 1e-6
    np.testing.assert_allclose(numerical, exact, atol=1e-5 * np.abs(exact).max())
    np.testing.assert_allclose(exact.sum(axis=1), 0, atol=1e-10 * counts.sum())


def test_the_reduced_solution_fixes_the_reference_and_solves_the_rest() -> None:
    weights, counts, beta, energies = problem(6)
    solution = solve(weights.sum(axis=0), counts, beta, energies)
    matrix = hessian(weights.sum(axis=0), solution.probabilities)
    right = np.random.default_rng(3).standard_normal((6, 3))
    right -= right.mean(axis=0)  # a singular matrix whose rows add up to zero reaches nothing else

    found = solve_reduced(matrix, right, 2)

    np.testing.assert_array_equal(found[2], 0)
    np.testing.assert_allclose(matrix @ found, right, atol=1e-10)
    np.testing.assert_allclose(solve_reduced(matrix, right[:, 0], 2), found[:, 0], atol=1e-12)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("spacing", [0.3, 1.5, 3.5])
def test_newton_arrives_from_afar_and_in_few_steps_from_the_pairwise_start(spacing: float, seed: int) -> None:
    weights, counts, beta, energies = problem(8, spacing)
    total = weights.sum(axis=0)
    near = solve(total, counts, beta, energies, pairwise_start(weights, counts, beta, energies))
    away = near.free_energies + 10 * np.random.default_rng(seed).standard_normal(8)
    far = solve(total, counts, beta, energies, away)

    assert near.iterations <= 6
    np.testing.assert_allclose(far.free_energies, near.free_energies, atol=1e-9)


def test_the_pairwise_start_is_close_to_the_solution_of_two_runs() -> None:
    weights, counts, beta, energies = problem(2)
    start = pairwise_start(weights, counts, beta, energies)
    solution = solve(weights.sum(axis=0), counts, beta, energies, start)

    assert start[1] - start[0] == pytest.approx(
        solution.free_energies[1] - solution.free_energies[0], abs=START
    )
    assert solution.iterations <= 3


def test_the_order_of_the_temperatures_does_not_matter() -> None:
    weights, counts, beta, energies = problem(6)
    order = np.array([3, 0, 5, 1, 4, 2])
    one = solve(weights.sum(axis=0), counts, beta, energies, pairwise_start(weights, counts, beta, energies))
    start = pairwise_start(weights[order], counts[order], beta[order], energies)
    other = solve(weights.sum(axis=0), counts[order], beta[order], energies, start)

    np.testing.assert_allclose(other.free_energies, one.free_energies[order], atol=1e-10)
    np.testing.assert_allclose(
        cut_sharing(weights.sum(axis=0), other.probabilities, beta[order]),
        cut_sharing(weights.sum(axis=0), one.probabilities, beta),
        rtol=1e-9,
    )


def test_a_single_run_needs_no_solving() -> None:
    weights, counts, beta, energies = problem(1)
    start = pairwise_start(weights, counts, beta, energies)
    solution = solve(weights.sum(axis=0), counts, beta, energies, start)

    np.testing.assert_array_equal(solution.free_energies, [0])
    np.testing.assert_array_equal(solution.probabilities, np.ones((1, energies.size)))
    assert cut_sharing(weights.sum(axis=0), solution.probabilities, beta).shape == (0,)


def test_a_solution_at_known_free_energies_has_the_same_bits() -> None:
    weights, counts, beta, energies = problem(7)
    solution = solve(weights.sum(axis=0), counts, beta, energies)

    again = solution_at(solution.free_energies, counts, beta, energies, iterations=3, residual=0.5)

    assert again.probabilities.tobytes() == solution.probabilities.tobytes()
    assert again.log_denominator.tobytes() == solution.log_denominator.tobytes()
    assert (again.iterations, again.residual) == (3, 0.5)


def test_runs_apart_share_less_than_one_sample_and_runs_together_share_a_quarter() -> None:
    """Between equal runs of n samples each, P = 1/2 everywhere: c = 2 n / 4."""
    for spacing, lowest, highest in ((12.0, 0.0, 1.0), (0.0, 200.0, 200.0), (1.0, 100.0, 200.0)):
        rng = np.random.default_rng(5)
        drawn = np.rint(rng.normal(0, 5, (2, 400)) + np.array([[0.0], [5 * spacing]]))
        energies = np.unique(drawn)
        weights = np.array([[np.count_nonzero(run == e) for e in energies] for run in drawn], float)
        counts, beta = np.full(2, 400.0), np.array([1.0, 1.0 - spacing / 5])
        start = pairwise_start(weights, counts, beta, energies)
        shared = cut_sharing(
            weights.sum(axis=0),
            solution_at(start, counts, beta, energies, iterations=0, residual=0.0).probabilities,
            beta,
        )
        assert lowest <= shared[0] <= highest + 1e-9


def test_the_sharing_tells_the_standard_error_of_the_free_energy_across_a_cut() -> None:
    """``1 / sqrt(c)`` is about the standard deviation over repeated experiments once c <= 35 (own simulations)."""
    steps, shared = [], []
    for seed in range(200):
        weights, counts, beta, energies = problem(2, 4.2, 400, seed)
        start = pairwise_start(weights, counts, beta, energies)
        solution = solve(weights.sum(axis=0), counts, beta, energies, start)
        steps.append(solution.free_energies[1] - solution.free_energies[0])
        shared.append(float(cut_sharing(weights.sum(axis=0), solution.probabilities, beta)[0]))

    assert 5 < np.median(shared) < 35
    # 200 experiments know a standard deviation to 5 %; "about" is 25 %: one false alarm in a million.
    assert np.std(steps) * np.sqrt(np.median(shared)) == pytest.approx(1, rel=0.25)


def test_runs_that_share_nothing_are_refused_with_groups_and_bridges() -> None:
    rng = np.random.default_rng(6)
    temperatures = {"b": 1.0, "a": 1.05, "far": 3.0, "farther": 3.2}
    runs = {name: rng.gamma(200.0, t, 1000) for name, t in temperatures.items()}

    with pytest.raises(
        rw.DisconnectedError,
        match=r"got 2 groups that do not: \[b, a\]; \[far, farther\].*Between 'a' and 'far'",
    ) as refusal:
        rw.combine(runs, temperatures=list(temperatures.values()))

    assert refusal.value.groups == (("b", "a"), ("far", "farther"))
    bridges = refusal.value.bridges
    assert ((bridges > 1.05) & (bridges < 3.0)).all()
    # Runs at these temperatures do join them: that is what the advice promises.
    bridged = {**runs, **{f"bridge {i}": rng.gamma(200.0, t, 1000) for i, t in enumerate(bridges)}}
    combined = rw.combine(bridged, temperatures=[*temperatures.values(), *bridges])
    assert combined.sharing.min() > 10
    assert len(bridges) <= 20  # sqrt(200) * ln(3 / 1.05) = 14.8 standard deviations: no more than asked for


def test_three_groups_are_named_from_cold_to_hot() -> None:
    rng = np.random.default_rng(7)
    runs = {name: rng.gamma(400.0, t, 500) for name, t in (("hot", 9.0), ("cold", 1.0), ("middle", 3.0))}

    with pytest.raises(rw.DisconnectedError, match="3 groups") as refusal:
        rw.combine(runs, temperatures=[9.0, 1.0, 3.0])

    assert refusal.value.groups == (("cold",), ("middle",), ("hot",))


def test_equations_without_a_solution_are_refused_by_name() -> None:
    """Two runs whose energies never meet, however far one looks: the curvature underflows to zero."""
    energies = np.array([0.0, 1e6])
    with pytest.raises(ConvergenceError, match=r"some runs share no energies.*Add runs between them"):
        solve(
            np.array([5.0, 5.0]), np.array([5.0, 5.0]), np.array([2.0, 1.0]), energies, np.array([0.0, -5e5])
        )
