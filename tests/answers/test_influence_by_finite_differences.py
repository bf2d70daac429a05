"""Error bars against derivatives: change a little how much one stretch of a run counts, solve again, ask again.

The error of an answer comes from its influence functions summed over the leaves of every run.  Counting a leaf
``1 + e`` times moves the answer by ``e`` times that sum, and nothing in the equations needs to be differentiated to
see it.  Central differences with e = 1e-4 agree to about e**2 of the effect; the tolerance is 1e-6 of its
root mean square.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable

import numpy as np
import pytest

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.combining import estimate_of
from reweight.uncertainty.influence import centred
from reweight.uncertainty.window import variance

STEP = 1e-4
TOLERANCE = 1e-6
MOST = "84 %"

Ask = Callable[[rw.DensityOfStates], np.ndarray]


def counting_a_leaf(combined: rw.DensityOfStates, run: int, leaf: int, times: float) -> rw.DensityOfStates:
    """The same study with one leaf of one run counted so many times."""
    assembly = combined.estimate.assembly
    changed = assembly.runs[run]
    factor = np.ones(changed.rows.size)
    factor[leaf] = times
    changed = dataclasses.replace(
        changed, sums=tuple(each * factor[:, None] for each in changed.sums), rows=changed.rows * factor
    )
    runs = (*assembly.runs[:run], changed, *assembly.runs[run + 1 :])
    estimate = estimate_of(combined.description, combined.runs, dataclasses.replace(assembly, runs=runs))
    return dataclasses.replace(combined, estimate=estimate)


def differences(combined: rw.DensityOfStates, ask: Ask) -> list[np.ndarray]:
    """Centred block sums by finite differences; one array (leaves, answers) a run."""
    blocks = []
    for place, run in enumerate(combined.runs):
        rows = []
        for leaf in range(run.decision.first_leaf, run.leaf_rows.size):
            up, down = (
                np.ravel(ask(counting_a_leaf(combined, place, leaf, times))) for times in (1 + STEP, 1 - STEP)
            )
            rows.append((up - down) / (2 * STEP))
        blocks.append(centred(np.array(rows), combined.estimate.runs[place].counts))
    return blocks


def assert_same_blocks(found: list[np.ndarray], expected: list[np.ndarray]) -> None:
    for one, other in zip(found, expected, strict=True):
        scale = np.sqrt(np.mean(other**2, axis=0))
        assert np.all(scale > 0)  # otherwise nothing is compared
        np.testing.assert_array_less(np.abs(one - other).max(axis=0) / scale, TOLERANCE)


@pytest.fixture(scope="module")
def on_levels() -> rw.DensityOfStates:
    """Runs of unequal inefficiency and length; most leaves are discarded to keep the number of solutions small."""
    rng = np.random.default_rng(3)
    runs = {}
    for name, temperature, rows, held in (("a", 1.0, 2000, 1), ("b", 1.3, 2600, 2), ("c", 1.7, 1700, 1)):
        energy = np.repeat(rng.poisson(9 * temperature, rows // held), held).astype(float)
        runs[name] = {"energy": energy, "order": np.cos(energy) + rng.standard_normal(rows)}
    return rw.combine(
        runs,
        temperatures=[1.0, 1.3, 1.7],
        discard=MOST,
        states="3^20",
        observables={"order": {"is": "total", "above": 0.3}},
    )


@pytest.fixture(scope="module")
def on_panels() -> rw.DensityOfStates:
    rng = np.random.default_rng(4)
    runs = {}
    for temperature in (300.0, 330.0):
        energy = rng.gamma(12.0, 0.0083 * temperature, 2600)
        runs[f"{temperature}"] = {"energy": energy, "order": energy**1.5 + rng.standard_normal(2600)}
    return rw.combine(runs, temperatures=[300.0, 330.0], energy_unit="kJ/mol", discard=MOST)


@pytest.mark.parametrize("kind", ["on_levels", "on_panels"])
def test_the_error_of_every_quantity_in_the_catalogue_is_that_of_its_derivatives(kind, request) -> None:
    combined = request.getfixturevalue(kind)
    beta = combined.estimate.beta.mean() * np.array([0.93, 1.05])
    reference = float(combined.estimate.beta.min())
    quantities = combined.quantities(combined.quantity_names)
    assert len(quantities) >= 7

    def ask(perturbed: rw.DensityOfStates) -> np.ndarray:
        return np.array([each.value for each in evaluate(perturbed, quantities, beta, reference=reference)])

    found = differences(combined, ask)

    evaluations = evaluate(combined, quantities, beta, reference=reference)
    expected = [
        np.concatenate(parts, axis=1) for parts in zip(*(each.blocks for each in evaluations), strict=True)
    ]
    assert_same_blocks(found, expected)


@pytest.mark.parametrize("kind", ["on_levels", "on_panels"])
def test_the_error_of_ln_g_is_that_of_its_derivatives(kind, request) -> None:
    combined = request.getfixturevalue(kind)
    answer = rw.states(combined)
    reference = int(np.flatnonzero(answer.energy == answer.attrs["reference_energy"])[0])

    def ask(perturbed: rw.DensityOfStates) -> np.ndarray:
        # Which energy is the reference must not hinge on the perturbation, so the difference is taken here.
        value = rw.states(perturbed)["log_density_of_states"].to_numpy()
        return value - value[reference]

    spread = variance(differences(combined, ask))

    error = answer["log_density_of_states_standard_error"].to_numpy()
    assert error[reference] == 0
    np.testing.assert_allclose(
        np.delete(error, reference), np.delete(spread.standard_error, reference), rtol=TOLERANCE
    )


def test_the_error_of_an_absolute_ln_g_includes_that_of_its_anchor(on_levels, monkeypatch) -> None:
    # Infinite temperature is not in reach of these few samples; the derivative exists all the same.
    monkeypatch.setattr(
        "reweight.answers.states._refuse_unless_infinite_temperature_is_in_reach", lambda _: None
    )

    spread = variance(
        differences(
            on_levels, lambda each: rw.states(each, absolute=True)["log_density_of_states"].to_numpy()
        )
    )

    error = rw.states(on_levels, absolute=True)["log_density_of_states_standard_error"].to_numpy()
    np.testing.assert_allclose(error, spread.standard_error, rtol=TOLERANCE)


def test_the_error_of_a_ground_degeneracy_anchor_is_that_of_its_derivatives() -> None:
    rng = np.random.default_rng(6)
    runs = {str(t): rng.binomial(6, 0.25 * t, 2000).astype(float) for t in (1.0, 1.5)}
    combined = rw.combine(runs, temperatures=[1.0, 1.5], ground_degeneracy=3, discard=MOST)

    spread = variance(
        differences(combined, lambda each: rw.states(each, absolute=True)["log_density_of_states"].to_numpy())
    )

    error = rw.states(combined, absolute=True)["log_density_of_states_standard_error"].to_numpy()
    np.testing.assert_allclose(error[1:], spread.standard_error[1:], rtol=TOLERANCE)


@pytest.mark.parametrize("kind", ["on_levels", "on_panels"])
def test_the_error_of_a_probability_is_that_of_its_derivatives(kind, request) -> None:
    combined = request.getfixturevalue(kind)
    at = float(combined.temperatures.mean())

    spread = variance(
        differences(
            combined, lambda each: rw.distribution(each, at, beyond_reach=True)["probability"].to_numpy()
        )
    )

    error = rw.distribution(combined, at, beyond_reach=True)["probability_standard_error"].to_numpy()[0]
    np.testing.assert_allclose(error, spread.standard_error, rtol=TOLERANCE)


def test_an_error_bar_without_the_shift_of_the_free_energies_would_be_noticed(on_levels, monkeypatch) -> None:
    """Negative control: leave out the response of the free energies, and the comparison above fails."""
    monkeypatch.setattr("reweight.answers.bins.with_free_energies", lambda _estimate, direct: direct)
    blocks = differences(
        on_levels, lambda each: rw.distribution(each, 1.5, beyond_reach=True)["probability"].to_numpy()
    )

    error = rw.distribution(on_levels, 1.5, beyond_reach=True)["probability_standard_error"].to_numpy()[0]
    with pytest.raises(AssertionError):
        np.testing.assert_allclose(error, variance(blocks).standard_error, rtol=0.05)
