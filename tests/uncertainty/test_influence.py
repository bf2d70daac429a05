"""Influence functions against finite differences: add a little weight at one energy, solve again, ask again.

Central differences with a weight of 0.05 samples among some thousands: the neglected term is of relative order 1e-9, and
solving to rounding costs about 1e-9 of the influence.  Agreement is measured against the root mean square influence, over
nodes that hold samples and over those that do not.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.sampling import draw_levels
from reweight.estimate import Estimate
from reweight.multistate import solve
from reweight.quantities.catalogue import available
from reweight.quantities.moments import LOG_PARTITION, Moments
from reweight.quantities.quantity import Quantity
from reweight.tally.nodes import COUNT
from reweight.tally.panels import nodes, powers
from reweight.uncertainty.influence import block_sums, chain, influence
from reweight.uncertainty.window import variance

Array = NDArray[np.float64]

TEMPERATURES = [2.0, 2.25, 2.5, 3.0]
WEIGHT = 0.05
AGREEMENT = 1e-6
OBSERVABLES = {"order": {"moments": [1, 2, 4], "absolute": True, "is": "total"}}


def correlated_lattice(seed: int = 5, length: int = 3000) -> rw.DensityOfStates:
    """Four correlated runs of the 8 x 8 lattice with unequal lengths, with an observable."""
    rng = np.random.default_rng(seed)
    energies, log_counts = lattice_log_degeneracies(8)
    runs = {}
    for i, t in enumerate(TEMPERATURES):
        drawn = draw_levels(energies, log_counts, t, length + 500 * i, rng, coefficient=0.8)
        order = np.sqrt(np.maximum(-drawn, 0) * 32) * rng.choice([-1, 1], drawn.size) + rng.normal(
            0, 4, drawn.size
        )
        runs[f"T = {t}"] = {"energy": drawn, "order": order}
    return rw.combine(runs, temperatures=TEMPERATURES, observables=OBSERVABLES, count=64, discard=0)


@pytest.fixture(scope="module")
def combined() -> rw.DensityOfStates:
    return correlated_lattice()


def inefficiencies(combined: rw.DensityOfStates) -> Array:
    return np.array([run.decision.weight_inefficiency for run in combined.runs])


def with_added_weight(
    combined: rw.DensityOfStates,
    run: int,
    node: int,
    weight: float,
    column: int = 0,
    *,
    counted: bool = False,
) -> rw.DensityOfStates:
    """The same runs with a little more (or less) weight at one node of one leaf, solved again.

    The number of samples is left alone unless the weight is to be counted: only then is the change of an answer the
    influence itself, and not the influence plus something that all samples of the run have in common.
    """
    estimate, weighting = combined.estimate, inefficiencies(combined)
    parts = list(estimate.assembly.runs)
    sums = [each.copy() for each in parts[run].sums]
    rows = parts[run].rows.astype(float)
    key, local = divmod(node, estimate.assembly.order)
    sample = powers(nodes(estimate.assembly.order)[local : local + 1], estimate.assembly.order)[:, 0]
    sums[column][3, key :: parts[run].place.size] += weight * weighting[run] * sample
    rows[3] += weight * weighting[run] * counted
    parts[run] = dataclasses.replace(parts[run], sums=tuple(sums), rows=rows)
    changed = Estimate.solved(
        dataclasses.replace(estimate.assembly, runs=tuple(parts)),
        estimate.columns,
        estimate.beta,
        [0] * len(parts),
        weighting,
        weighting,
        lambda per_run, counts, beta, energies: solve(
            per_run.sum(axis=0), counts, beta, energies, estimate.solution.free_energies
        ),
    )
    return dataclasses.replace(combined, estimate=changed)


def nodes_to_try(combined: rw.DensityOfStates, run: int) -> list[int]:
    """Often visited, rarely visited, and the extremes of a run's nodes."""
    total = combined.estimate.runs[run].total[0]
    order = np.argsort(total)
    return sorted({0, total.size - 1, int(order[0]), int(order[-1]), int(order[total.size // 2])})


def assert_influence(
    combined: rw.DensityOfStates,
    claimed: Array,
    ask: Callable[[rw.DensityOfStates], Array],
    column: int = 0,
) -> float:
    """Compare claimed influences, shape (Q, T), with central differences; return the largest deviation found."""
    estimate = combined.estimate
    weights = np.maximum(estimate.weights[0], 0)
    rms = np.sqrt(weights @ claimed**2 / weights.sum())
    worst = 0.0
    for run in (0, 2):
        for node in nodes_to_try(combined, run):
            more = ask(with_added_weight(combined, run, node, WEIGHT, column))
            less = ask(with_added_weight(combined, run, node, -WEIGHT, column))
            found = (more - less) / (2 * WEIGHT)
            worst = max(worst, float((np.abs(found - claimed[estimate.runs[run].index][node]) / rms).max()))
    assert worst < AGREEMENT
    return worst


def quantities() -> dict[str, Quantity]:
    return available({"order": "total"})


BETA = 1 / np.array([2.0, 2.13, 2.4, 2.8])


@pytest.mark.parametrize("name", quantities())
def test_the_influence_on_every_quantity_is_its_derivative(name: str, combined: rw.DensityOfStates) -> None:
    quantity = quantities()[name]
    claimed = influence(quantity, Moments(combined.estimate.canonical(BETA), 1.0))

    for column, influences in claimed.columns.items():
        assert_influence(
            combined,
            influences,
            lambda c: quantity.value(Moments(c.estimate.canonical(BETA), 1.0)),
            combined.estimate.columns.index(column),
        )


def test_the_influence_on_the_partition_function_is_its_derivative(combined: rw.DensityOfStates) -> None:
    canonical = combined.estimate.canonical(BETA)
    claimed = chain(canonical, Moments(canonical, 1.0), {LOG_PARTITION: np.ones(BETA.size)}).columns[COUNT]

    assert_influence(combined, claimed, lambda c: c.estimate.canonical(BETA).log_partition)


def test_the_influence_on_the_free_energies_is_their_derivative(combined: rw.DensityOfStates) -> None:
    """``-H^-1 p(E)``, the reference run left out, which never moves."""
    estimate = combined.estimate
    others = estimate.solution.free_energies != 0
    claimed = -estimate.spread(estimate.solution.probabilities).T

    assert others.sum() == len(TEMPERATURES) - 1
    np.testing.assert_array_equal(claimed[:, ~others], 0)
    assert_influence(combined, claimed[:, others], lambda c: c.estimate.solution.free_energies[others])


def explicit_peak_influence(combined: rw.DensityOfStates, beta: float) -> tuple[Array, Array, float]:
    """Influence on the position (in T) and height of the peak of C, and by how much ``beta`` misses the condition.

    With ``k2 .. k4`` the cumulants and ``op[phi]`` the direct influence plus that through the free energies, the peak of
    ``C = beta**2 k2`` has ``2 k2 - beta k3 = 0``; written out here from the moments, with no derivative of any curve.
    """
    estimate = combined.estimate
    canonical = estimate.canonical(np.array([beta]))
    r, d, weights = canonical.weights[:, 0], canonical.deviation[:, 0], estimate.weights[0]
    k2, k3, m4 = (float(weights @ (r * d**power)) for power in (2, 3, 4))
    slope = beta * (m4 - 3 * k2**2) - 3 * k3

    def op(phi: Array) -> Array:
        p = estimate.solution.probabilities
        return phi + p.T @ estimate.spread(p @ (weights * phi))

    on_k2 = op(r * (d**2 - k2))
    on_k3 = op(r * (d**3 - k3 - 3 * k2 * d))
    on_beta = -(2 * on_k2 - beta * on_k3) / slope
    return -on_beta / beta**2, beta**2 * on_k2, (2 * k2 - beta * k3) / slope * np.sqrt(k2)


LIMITS = {"lowest": 2.05, "highest": 2.9, "beyond_reach": True}


def test_the_peak_satisfies_its_condition(combined: rw.DensityOfStates) -> None:
    """``2 k2 = beta k3`` to 1e-8 of the width 1 / sigma of anything a canonical curve can show."""
    peak = rw.peaks(combined, **LIMITS)[0]
    _, _, missed = explicit_peak_influence(combined, 1 / peak.temperature)

    assert not peak.at_edge
    assert abs(missed) < 1e-8


def test_the_influence_on_position_and_height_of_a_peak_is_their_derivative(
    combined: rw.DensityOfStates,
) -> None:
    peak = rw.peaks(combined, **LIMITS)[0]
    position, height, _ = explicit_peak_influence(combined, 1 / peak.temperature)

    def ask(changed: rw.DensityOfStates) -> Array:
        moved = rw.peaks(changed, **LIMITS)[0]
        return np.array([moved.temperature, moved.height])

    assert_influence(combined, np.stack([position, height], axis=1), ask)


def test_the_errors_of_a_peak_are_those_of_its_explicit_influence(combined: rw.DensityOfStates) -> None:
    """The package differences curves numerically; the explicit formulas must give the same error bars to 1e-6."""
    peak = rw.peaks(combined, **LIMITS)[0]
    position, height, _ = explicit_peak_influence(combined, 1 / peak.temperature)

    class Explicit:
        columns = {COUNT: np.stack([position, height], axis=1)}  # noqa: RUF012

    expected = variance(block_sums(combined.estimate, Explicit()))  # type: ignore[arg-type]
    assert peak.temperature_standard_error == pytest.approx(expected.standard_error[0], rel=1e-6)
    assert peak.height_standard_error == pytest.approx(expected.standard_error[1], rel=1e-6)


@pytest.mark.parametrize("name", quantities())
def test_block_sums_of_a_run_add_up_to_nothing(name: str, combined: rw.DensityOfStates) -> None:
    """Centring: what all samples of a run have in common is no noise."""
    (evaluation,) = evaluate(combined, [quantities()[name]], BETA)

    for blocks in evaluation.blocks:
        assert blocks.shape == (blocks.shape[0], BETA.size)
        np.testing.assert_allclose(blocks.sum(axis=0), 0, atol=1e-10 * np.abs(blocks).sum(axis=0).max())


def test_a_sample_that_is_counted_moves_the_answer_by_its_influence_up_to_a_constant_of_its_run(
    combined: rw.DensityOfStates,
) -> None:
    """Why run means may be subtracted: with the sample counted, too, all of a run shift by one common constant."""
    estimate, quantity, run = combined.estimate, quantities()["heat_capacity"], 1
    claimed = influence(quantity, Moments(estimate.canonical(BETA), 1.0)).columns[COUNT]

    def ask(node: int, weight: float) -> Array:
        changed = with_added_weight(combined, run, node, weight, counted=True)
        return quantity.value(Moments(changed.estimate.canonical(BETA), 1.0))

    excess = [
        (ask(node, WEIGHT) - ask(node, -WEIGHT)) / (2 * WEIGHT) - claimed[estimate.runs[run].index][node]
        for node in nodes_to_try(combined, run)
    ]
    rms = np.sqrt(estimate.weights[0] @ claimed**2 / estimate.weights[0].sum())
    assert (np.ptp(np.array(excess), axis=0) < AGREEMENT * rms).all()
    assert (np.abs(excess[0]) > 100 * AGREEMENT * rms).any()  # the constant is there


def test_the_sign_of_the_free_energy_term_matters(combined: rw.DensityOfStates) -> None:
    """Negative control: with the other sign the derivative is missed by far more than the agreement asked for."""
    estimate = combined.estimate
    canonical = estimate.canonical(BETA)
    r, d, weights = canonical.weights, canonical.deviation, estimate.weights[0]
    p = estimate.solution.probabilities
    through = p.T @ estimate.spread(p @ (weights[:, None] * r * d))

    with pytest.raises(AssertionError):
        assert_influence(combined, r * d - through, lambda c: c.estimate.canonical(BETA).mean_energy)
    assert_influence(combined, r * d + through, lambda c: c.estimate.canonical(BETA).mean_energy)
