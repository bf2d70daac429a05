"""Temperatures at which quantities take a value, against systems solved exactly, and their errors against derivatives.

Sources: a Gamma distribution of energies (shape a) has ``<E> = a k T`` (equipartition, textbook); the 8 x 8 lattice of
two-state sites from its exact counts of states (B. Kaufman, Phys. Rev. 76, 1232 (1949), reweight.datasets.exact); the
4 x 4 lattice by enumeration of its 65,536 states.

Answers must lie within four of their own standard errors of the exact value (missed once in 10,000 by chance; seeds are
fixed), and the errors below a cap, without which this would prove nothing.
"""

from __future__ import annotations

import dataclasses
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.stats import binomtest

import reweight as rw
from reweight.combining import estimate_of
from reweight.datasets.exact import canonical, canonical_mean, lattice_log_degeneracies
from reweight.datasets.exact_models import lattice_joint_levels
from reweight.datasets.sampling import draw_joint
from reweight.errors import NoCrossingError
from reweight.uncertainty.influence import centred
from reweight.uncertainty.window import variance

GAS_CONSTANT = 8.31446261815324e-3  # kJ/(mol K), exact by definition (SI 2019)
SHAPE = 30.0  # of the oscillators in conftest.py


def assert_within_error(found: rw.Crossing, exact: float, cap: float) -> None:
    assert abs(found.temperature - exact) < 4 * found.temperature_standard_error
    assert 0 < found.temperature_standard_error < cap
    assert found.within_reach
    low, high = found.temperature_interval
    assert low < found.temperature < high


# --- against exact answers --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("exact", [272.0, 310.0, 330.0])
def test_oscillators_have_an_energy_where_equipartition_says(oscillators, exact) -> None:
    (found,) = rw.crossings(oscillators, of="energy", equals=SHAPE * GAS_CONSTANT * exact)

    assert_within_error(found, exact, cap=1.5)
    assert found.slope_significant
    assert abs(found.slope - SHAPE * GAS_CONSTANT) < 4 * found.slope_standard_error
    assert (found.of, found.unit, found.per, found.reference_temperature) == (
        "energy",
        "kJ mol-1",
        None,
        None,
    )


def test_the_lattice_has_an_energy_where_its_counts_of_states_say(lattice) -> None:
    levels, logs = lattice_log_degeneracies(8)
    exact = brentq(lambda t: canonical(levels, logs, t).mean_energy[0] + 90.0, 2.0, 4.0)

    (found,) = rw.crossings(lattice, of="energy", equals=-90.0)

    assert_within_error(found, exact, cap=0.01)


def test_a_value_below_a_peak_is_taken_on_both_of_its_sides(lattice) -> None:
    levels, logs = lattice_log_degeneracies(8)
    exact = [
        brentq(lambda t: canonical(levels, logs, t).heat_capacity[0] - 64.0, *limits)
        for limits in ((2.0, 2.3), (2.4, 3.0))
    ]

    found = rw.crossings(lattice, of="heat_capacity", equals=1.0, per_count=True)

    assert len(found) == 2
    for each, temperature in zip(found, exact, strict=True):
        assert_within_error(each, temperature, cap=0.05)
        assert each.slope_significant
        assert (each.equals, each.per) == (1.0, "site")
    assert found[0].slope > 0 > found[1].slope


def test_an_observable_passes_a_value_where_the_enumeration_says(small_lattice) -> None:
    joint = lattice_joint_levels()
    exact = brentq(
        lambda t: canonical_mean(joint.energies, joint.log_degeneracies, joint.observable / 16, t)[0] - 0.75,
        2.0,
        3.0,
    )

    (found,) = rw.crossings(small_lattice, of="absm.mean", equals=0.75)

    assert_within_error(found, exact, cap=0.02)


def test_an_entropy_difference_is_counted_as_in_a_curve(lattice) -> None:
    """S(T) - S(2.0) of the exact lattice; the coldest run is the reference, and is said to be."""
    levels, logs = lattice_log_degeneracies(8)

    def entropy(temperature: float) -> float:
        at = canonical(levels, logs, temperature)
        return float(at.log_partition[0] + at.mean_energy[0] / temperature)

    exact = brentq(lambda t: entropy(t) - entropy(2.0) - 15.0, 2.0, 4.0)

    (found,) = rw.crossings(lattice, of="entropy", equals=15.0)

    assert found.reference_temperature == 2.0
    assert_within_error(found, exact, cap=0.05)
    assert float(rw.curve(lattice, found.temperature, of="entropy").entropy[0]) == pytest.approx(15.0)
    (at_reference,) = rw.crossings(lattice, of="entropy", equals=0.0)
    assert at_reference.temperature == 2.0
    assert at_reference.temperature_standard_error == 0  # zero there by definition


# --- consistency ------------------------------------------------------------------------------------------------------


def test_a_crossing_is_where_the_curve_has_the_value_and_its_error_is_that_of_the_curve_over_the_slope(
    oscillators,
) -> None:
    (found,) = rw.crossings(oscillators, of="size.mean", equals=8.75)

    at = rw.curve(oscillators, found.temperature, of=["size.mean", "size.slope"])
    assert float(at.size_mean[0]) == pytest.approx(8.75, rel=1e-12)
    assert found.slope == pytest.approx(float(at.size_slope[0]), rel=1e-7)
    assert found.temperature_standard_error == pytest.approx(
        float(at.size_mean_standard_error[0] / abs(at.size_slope[0])), rel=1e-7
    )
    shares = at.size_mean_variance_share.to_numpy()[:, 0]
    np.testing.assert_allclose(list(found.variance_share.values()), shares, rtol=1e-7)
    assert list(found.variance_share) == [run.name for run in oscillators.runs]
    assert sum(found.variance_share.values()) == pytest.approx(1.0)
    assert found.effective_sample_size == pytest.approx(float(at.effective_sample_size[0]))


def test_the_value_is_read_in_the_unit_in_which_answers_are_shown(oscillators) -> None:
    """20 oscillators; 1 kcal = 4.184 kJ (thermochemical calorie, by definition)."""
    (total,) = rw.crossings(oscillators, of="energy", equals=77.0)

    (shown,) = rw.crossings(
        oscillators, of="energy", equals=77.0 / 20 / 4.184, per_count=True, energy_unit="kcal/mol"
    )

    assert shown.temperature == pytest.approx(total.temperature, rel=1e-12)
    assert shown.temperature_standard_error == pytest.approx(total.temperature_standard_error, rel=1e-9)
    assert shown.slope == pytest.approx(total.slope / 20 / 4.184, rel=1e-9)
    assert shown.slope_standard_error == pytest.approx(total.slope_standard_error / 20 / 4.184, rel=1e-9)
    assert (shown.unit, shown.per) == ("kcal mol-1", "oscillator")


@pytest.mark.parametrize("end", ["lowest", "highest"])
def test_a_value_taken_exactly_at_an_end_of_the_search_is_found_there(oscillators, end) -> None:
    value = float(rw.curve(oscillators, 305.0, of="energy").mean_energy[0])
    limits = {"lowest": 305.0, "highest": 330.0} if end == "lowest" else {"lowest": 290.0, "highest": 305.0}
    # Last digits lost on the way, as in a unit converted to and fro, put the value just outside.
    outwards = value * (1 - 4e-16 if end == "lowest" else 1 + 4e-16)
    assert outwards != value

    (found,) = rw.crossings(oscillators, of="energy", equals=outwards, **limits)

    assert found.temperature == pytest.approx(305.0, rel=1e-12)
    assert found.temperature_standard_error > 0


def test_the_search_keeps_to_the_limits_that_were_asked(lattice) -> None:
    cold, hot = rw.crossings(lattice, of="heat_capacity", equals=64.0)

    (found,) = rw.crossings(lattice, of="heat_capacity", equals=64.0, lowest=2.35)

    assert found.temperature == pytest.approx(hot.temperature, rel=1e-12)
    assert cold.temperature < 2.35


def test_a_higher_level_gives_a_wider_interval_and_nothing_else(oscillators) -> None:
    narrow, wide = (
        rw.crossings(oscillators, of="energy", equals=77.0, level=level)[0] for level in (0.68, 0.99)
    )

    assert np.ptp(wide.temperature_interval) > 2 * np.ptp(narrow.temperature_interval)
    assert wide.temperature_standard_error == narrow.temperature_standard_error


def test_a_value_just_below_a_maximum_has_no_significant_slope(lattice) -> None:
    """A straight line does not hold for a standard error: the top itself is not known that well."""
    (peak, *_) = rw.peaks(lattice, lowest=2.1, highest=3.0)
    limits = {"lowest": 2.1, "highest": 3.0}

    close = rw.crossings(
        lattice, of="heat_capacity", equals=peak.height - 0.2 * peak.height_standard_error, **limits
    )
    far = rw.crossings(
        lattice, of="heat_capacity", equals=peak.height - 30 * peak.height_standard_error, **limits
    )

    assert [each.slope_significant for each in close] == [False, False]
    assert [each.slope_significant for each in far] == [True, True]


def test_beyond_the_reach_a_crossing_is_marked(oscillators) -> None:
    far = 1.02 * rw.reach(oscillators, "energy").highest
    value = SHAPE * GAS_CONSTANT * far

    found = rw.crossings(oscillators, of="energy", equals=value, highest=1.3 * far, beyond_reach=True)

    assert not found[-1].within_reach
    with pytest.raises(NoCrossingError):
        rw.crossings(oscillators, of="energy", equals=value, highest=1.3 * far)


def test_at_infinite_temperature_there_is_no_error_bar(lattice) -> None:
    """C = k_B beta**2 var E is 0 there whatever was sampled."""
    found = rw.crossings(lattice, of="heat_capacity", equals=0.0, lowest=5.0)[-1]

    assert found.temperature == np.inf
    assert np.isnan(found.temperature_standard_error)
    assert not found.slope_significant


# --- refusals ---------------------------------------------------------------------------------------------------------


def test_a_value_that_is_not_taken_is_refused_with_those_that_are(oscillators) -> None:
    with pytest.raises(
        NoCrossingError,
        match=r"equals must lie between [\d.]+ and [\d.]+ kJ mol-1, the values that energy takes from [\d.]+ to "
        r"[\d.]+ K; got 500\. Ask for a value in between, or look, or add runs, hotter than [\d.]+ K\.",
    ) as refused:
        rw.crossings(oscillators, of="energy", equals=500.0)

    within = rw.reach(oscillators, "energy")
    at_ends = rw.curve(
        oscillators, [within.lowest, within.highest], of="energy", beyond_reach=True
    ).mean_energy
    np.testing.assert_allclose(refused.value.taken, at_ends, rtol=1e-9)
    with pytest.raises(NoCrossingError, match=r"per oscillator takes.*colder than [\d.]+ K"):
        rw.crossings(oscillators, of="energy", equals=1.0, per_count=True)


def test_above_a_maximum_no_other_temperature_is_advised(lattice) -> None:
    with pytest.raises(NoCrossingError, match=r"got 1000\. Ask for a value in between\.$"):
        rw.crossings(lattice, of="heat_capacity", equals=1000.0)


def test_a_value_taken_all_along_a_stretch_is_refused_as_such() -> None:
    rng = np.random.default_rng(5)
    runs = {str(t): {"energy": rng.gamma(30.0, t, 2000), "fixed": np.full(2000, 3.0)} for t in (1.0, 1.2)}
    combined = rw.combine(runs, temperatures=[1.0, 1.2], observables={"fixed": {"above": 2.0}})

    with pytest.raises(
        NoCrossingError, match=r"at single temperatures; got 1, which it has all along from 0\.\d"
    ):
        rw.crossings(combined, of="fixed.above", equals=1.0)


@pytest.mark.parametrize("equals", [np.nan, np.inf])
def test_a_value_must_be_finite(oscillators, equals) -> None:
    with pytest.raises(rw.InputError, match=r"equals must be finite; got (nan|inf)"):
        rw.crossings(oscillators, of="energy", equals=equals)


def test_limits_outside_the_reach_or_out_of_order_are_refused(oscillators) -> None:
    with pytest.raises(rw.OutOfReachError, match=r"a crossing is looked for within \["):
        rw.crossings(oscillators, of="energy", equals=77.0, lowest=900.0, highest=1000.0)
    with pytest.raises(rw.InputError, match=r"the lowest temperature must be below the highest"):
        rw.crossings(oscillators, of="energy", equals=77.0, lowest=320.0, highest=310.0)


# --- the error bar ----------------------------------------------------------------------------------------------------

STEP = 1e-4  # as in test_influence_by_finite_differences.py
TOLERANCE = 1e-6


@pytest.mark.parametrize(
    ("of", "equals"), [("energy", 12.0), ("heat_capacity", 9.3), ("free_energy", -1.0), ("order.above", 0.3)]
)
def test_the_errors_of_temperature_and_slope_are_those_of_their_derivatives(of, equals) -> None:
    """Count one leaf of one run a little more, solve again, find the crossing again: central differences."""
    rng = np.random.default_rng(3)
    temperatures = [1.0, 1.3, 1.7]
    runs = {}
    for temperature, rows, held in zip(temperatures, (2000, 2600, 1700), (1, 2, 1), strict=True):
        energy = np.repeat(rng.poisson(9 * temperature, rows // held), held).astype(float)
        runs[f"{temperature}"] = {
            "energy": energy,
            "order": np.cos(energy / 6) + 0.3 * rng.standard_normal(rows),
        }
    combined = rw.combine(
        runs, temperatures=temperatures, discard="84 %", observables={"order": {"above": 0.0}}
    )
    limits = {"of": of, "equals": equals, "lowest": 1.0, "highest": 1.7, "beyond_reach": True}

    def counting_a_leaf(run: int, leaf: int, times: float) -> NDArray[np.float64]:
        assembly = combined.estimate.assembly
        changed = assembly.runs[run]
        factor = np.ones(changed.rows.size)
        factor[leaf] = times
        changed = dataclasses.replace(
            changed, sums=tuple(each * factor[:, None] for each in changed.sums), rows=changed.rows * factor
        )
        replaced = (*assembly.runs[:run], changed, *assembly.runs[run + 1 :])
        estimate = estimate_of(
            combined.description, combined.runs, dataclasses.replace(assembly, runs=replaced)
        )
        found = rw.crossings(dataclasses.replace(combined, estimate=estimate), **limits)[0]
        return np.array([found.temperature, found.slope])

    blocks = []
    for place, run in enumerate(combined.runs):
        moves = [
            (counting_a_leaf(place, leaf, 1 + STEP) - counting_a_leaf(place, leaf, 1 - STEP)) / (2 * STEP)
            for leaf in range(run.decision.first_leaf, run.leaf_rows.size)
        ]
        blocks.append(centred(np.array(moves), combined.estimate.runs[place].counts))
    expected = variance(blocks).standard_error

    found = rw.crossings(combined, **limits)[0]
    assert found.temperature_standard_error == pytest.approx(expected[0], rel=TOLERANCE)
    assert found.slope_standard_error == pytest.approx(expected[1], rel=TOLERANCE)


EXPERIMENTS = 400
FALSE_ALARM = 1e-4  # of the binomial test below; it lets pass 362 to 395 of 400
INDEPENDENT = (
    300  # samples a run, each with 5 that go with it: an autoregression of coefficient 2/3 has g = 5
)


@cache
def misses_of_repeated_experiments() -> NDArray[np.float64]:
    """Distance of the temperature from the exact one in half widths of its interval, experiment by experiment."""
    joint = lattice_joint_levels()
    exact = brentq(
        lambda t: (
            canonical_mean(joint.energies, joint.log_degeneracies, joint.observable / 16 > 0.6, t)[0] - 0.7
        ),
        2.0,
        3.0,
    )
    rng = np.random.default_rng(20240815)
    temperatures = [2.0, 2.4, 2.9, 3.6]
    misses = []
    for _ in range(EXPERIMENTS):
        runs = {}
        for temperature in temperatures:
            energy, order = draw_joint(joint, temperature, 5 * INDEPENDENT, rng, coefficient=2 / 3)
            runs[f"{temperature}"] = {"energy": energy, "absm": order / 16}
        combined = rw.combine(
            runs, temperatures=temperatures, discard=0, observables={"absm": {"above": 0.6}}
        )
        (found,) = rw.crossings(combined, of="absm.above", equals=0.7, lowest=2.05, highest=3.5)
        misses.append(2 * abs(found.temperature - exact) / np.ptp(found.temperature_interval))
    return np.array(misses)


def covering_chance(covered: NDArray[np.bool_]) -> float:
    return float(binomtest(int(covered.sum()), covered.size, 0.95).pvalue)


def test_intervals_of_a_crossing_cover_the_exact_temperature_as_often_as_they_say() -> None:
    covered = misses_of_repeated_experiments() < 1

    assert covering_chance(covered) > FALSE_ALARM, f"{covered.mean():.1%} cover"


@pytest.mark.parametrize("factor", [1.5, 1 / 1.5])
def test_intervals_wrong_by_a_half_either_way_would_be_noticed(factor) -> None:
    """Negative control."""
    assert covering_chance(misses_of_repeated_experiments() * factor < 1) < FALSE_ALARM
