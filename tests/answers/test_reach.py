"""Reach: where its ends are, what they depend on, what ends it, and what happens to a question outside.

The rule itself (end mass, carrying samples) is calibrated elsewhere; here the promise is kept that the printed ends are
the border of what is answered.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.sampling import draw_gamma, draw_levels

SHAPE = 30.0


def gamma_study(
    samples: int, temperatures: tuple[float, ...] = (1.0, 1.25, 1.5), seed: int = 5
) -> rw.DensityOfStates:
    rng = np.random.default_rng(seed)
    runs = {str(t): draw_gamma(SHAPE, t, samples, rng) for t in temperatures}
    return rw.combine(runs, temperatures=list(temperatures), discard=0)


@pytest.fixture(scope="module")
def study() -> rw.DensityOfStates:
    return gamma_study(3000)


@pytest.mark.parametrize("name", ["energy", "heat_capacity", "entropy", "free_energy"])
def test_the_ends_of_the_reach_are_the_border_of_what_is_answered(study, name) -> None:
    within = rw.reach(study, name)
    quantity = study.quantities([name])
    reference = 1 / 1.25  # entropies count from well inside

    step = 1e-7
    asked = [
        within.lowest * (1 + step),
        within.highest * (1 - step),
        within.lowest * (1 - step),
        within.highest * (1 + step),
    ]
    (evaluation,) = evaluate(study, quantity, 1 / np.array(asked), reference=reference)

    assert evaluation.within_reach.tolist() == [True, True, False, False]
    assert within.lowest < 1.0
    assert within.highest > 1.5
    assert not within.empty


def test_the_ends_of_the_reach_of_an_observable_are_its_border_too(oscillators) -> None:
    for name in ("size.mean", "size.slope"):
        within = rw.reach(oscillators, name)
        (evaluation,) = evaluate(
            oscillators,
            oscillators.quantities([name]),
            oscillators.description.inverse_temperature(
                [within.lowest * (1 + 1e-7), within.lowest * (1 - 1e-7), within.highest * (1 + 1e-7)]
            ),
        )
        assert evaluation.within_reach.tolist() == [True, False, False]


def test_fluctuations_reach_less_far_than_means(study) -> None:
    energy, capacity = rw.reach(study, "energy"), rw.reach(study, "heat_capacity")

    assert energy.lowest < capacity.lowest
    assert capacity.highest < energy.highest


@pytest.mark.parametrize("name", ["energy", "heat_capacity"])
def test_more_samples_reach_further(name) -> None:
    few, many = rw.reach(gamma_study(500), name), rw.reach(gamma_study(32_000), name)

    assert many.lowest < few.lowest
    assert few.highest < many.highest


def test_colder_and_hotter_runs_widen_the_reach() -> None:
    two, four = rw.reach(gamma_study(2000, (1.0, 1.25))), rw.reach(gamma_study(2000, (0.85, 1.0, 1.25, 1.5)))

    assert four.lowest < two.lowest
    assert two.highest < four.highest


@pytest.mark.parametrize("name", ["energy", "heat_capacity", "entropy", "free_energy"])
def test_the_hot_end_is_infinite_where_infinite_temperature_was_sampled(lattice, name) -> None:
    within = rw.reach(lattice, name)

    assert within.highest == math.inf
    assert within.limited_by[1] == "nothing limits it"
    at_infinity = rw.answer(lattice, math.inf, of=name)
    assert bool(at_infinity.within_reach)
    if name == "heat_capacity":  # the levels end: C falls to 0 like 1 / T**2
        assert float(at_infinity.heat_capacity) == 0
        assert float(at_infinity.heat_capacity_standard_error) == 0


def test_infinite_temperature_can_be_in_reach_of_a_hot_run_alone() -> None:
    """At T = 100 the mean energy is a tenth of a standard deviation (11.3) from that of random states."""
    levels, log_degeneracies = lattice_log_degeneracies(8)
    rng = np.random.default_rng(1)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 10_000, rng) for t in (5.0, 100.0)}
    combined = rw.combine(runs, temperatures=[5.0, 100.0])

    assert rw.reach(combined, "heat_capacity").highest == math.inf
    energy = rw.answer(combined, math.inf, of="energy")
    assert abs(float(energy.mean_energy)) < 4 * float(energy.mean_energy_standard_error)
    assert float(energy.mean_energy_standard_error) < 0.5


def test_a_lattice_whose_hottest_run_is_cold_does_not_reach_infinite_temperature(small_lattice) -> None:
    levels, log_degeneracies = lattice_log_degeneracies(16)
    rng = np.random.default_rng(2)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 4000, rng) for t in (2.5, 3.0)}
    within = rw.reach(rw.combine(runs, temperatures=[2.5, 3.0]), "energy")

    assert 3.0 < within.highest < 6.0


def test_the_reach_says_what_ends_it(study) -> None:
    texts = {text for name in study.quantity_names for text in rw.reach(study, name).limited_by}

    for text in texts:
        assert text.startswith("only ") or text in (
            "energies lower than the sampled ones are needed",
            "energies higher than the sampled ones are needed",
        )
    # A number that is printed as too few is below the fewest allowed.
    numbers = [int(text.split()[1]) for text in texts if text.startswith("only ")]
    assert all(number < 30 for number in numbers)


def test_a_ground_level_well_visited_does_not_limit_the_cold_side(lattice) -> None:
    assert rw.reach(lattice, "energy").limited_by[0] == "nothing limits it as far as searched"
    assert bool(rw.curve(lattice, 0.5, of="energy").within_reach[0])


def test_too_few_samples_support_nothing_and_say_so() -> None:
    combined = gamma_study(12, (1.0, 1.1))
    within = rw.reach(combined)

    assert within.empty
    assert within.limited_by == ("too few samples", "too few samples")
    with pytest.raises(
        rw.OutOfReachError, match=r"must support heat_capacity somewhere; got too few independent samples"
    ):
        rw.curve(combined, of="heat_capacity")


# --- questions outside ------------------------------------------------------------------------------------------------


def test_an_answer_out_of_reach_is_refused_but_handed_over(study) -> None:
    with pytest.raises(
        rw.OutOfReachError, match=r"must lie in \[.*\], the reach .* got 4 \(2 of 3 values are outside\)"
    ) as refused:
        rw.answer(study, [1.2, 4.0, 5.0], of="energy")

    error = refused.value
    np.testing.assert_array_equal(error.outside, [4.0, 5.0])
    within = rw.reach(study, "energy")
    assert error.reach == (within.lowest, within.highest)
    assert "Add a run there" in str(error)
    # The estimate is what an explicit request gives, marked.
    expected = rw.answer(study, [1.2, 4.0, 5.0], of="energy", beyond_reach=True)
    assert error.estimate.identical(expected)
    assert expected.within_reach.to_numpy().tolist() == [True, False, False]
    assert expected.mean_energy.notnull().all()


def test_a_single_temperature_gives_a_dataset_without_that_dimension(study) -> None:
    answer = rw.answer(study, 1.2)

    assert answer.heat_capacity.ndim == 0
    assert float(answer.temperature) == 1.2
    assert rw.answer(study, [1.2]).heat_capacity.ndim == 1


def test_a_single_temperature_out_of_reach_carries_its_scalar_estimate(study) -> None:
    with pytest.raises(rw.OutOfReachError, match=r"got 4 \(1 of 1 values are outside\)") as refused:
        rw.answer(study, 4.0)
    assert refused.value.estimate.heat_capacity.ndim == 0


def test_a_curve_masks_each_quantity_by_its_own_reach(study) -> None:
    energy, capacity = rw.reach(study, "energy"), rw.reach(study, "heat_capacity")
    between = (energy.highest + capacity.highest) / 2

    answer = rw.curve(study, [1.2, between])

    assert answer.mean_energy.notnull().to_numpy().tolist() == [True, True]
    assert answer.heat_capacity.notnull().to_numpy().tolist() == [True, False]
    assert answer.heat_capacity_interval[1].isnull().all()
    assert answer.within_reach.to_numpy().tolist() == [True, False]


def test_a_curve_with_nothing_left_is_refused(study) -> None:
    with pytest.raises(rw.OutOfReachError, match=r"2 of 2 values are outside"):
        rw.curve(study, [4.0, 5.0])


def test_the_default_curve_spans_the_reach_and_is_supported_everywhere(study) -> None:
    answer = rw.curve(study, points=7)
    capacity = rw.reach(study, "heat_capacity")

    assert float(answer.temperature[0]) == pytest.approx(capacity.lowest)
    assert float(answer.temperature[-1]) == pytest.approx(capacity.highest)
    # Ends are found by bisection in 1 / T; a last bit may put the end itself outside.
    assert bool(answer.within_reach[1:-1].all())
