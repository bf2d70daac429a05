"""The density of states against exact counts, its error bars, and the refusal to make it absolute without an anchor.

Judges: exact integers of the square lattice (B. Kaufman, Phys. Rev. 76, 1232 (1949); datasets/exact.py) and, for
continuous energies, integrals that are known in closed form: a Gaussian density of states (B. Derrida, Phys. Rev. B 24,
2613 (1981)) and the power law E**(a - 1) of 2 a classical quadratic degrees of freedom (equipartition, any text).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import log_ndtr
from scipy.stats import binom

import reweight as rw
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.exact_models import ladder_levels
from reweight.datasets.sampling import draw_gamma, draw_gaussian, draw_levels
from reweight.density_of_states import DensityOfStates, Description
from reweight.estimate import Estimate
from reweight.multistate import pairwise_start, solve
from reweight.tally.assemble import Assembly, RunSums
from reweight.tally.nodes import COUNT

LN_G = "log_density_of_states"
LEAVES = 64


def fed_with_expected_counts(length: int, temperatures: list[float], samples: float) -> DensityOfStates:
    """Runs whose counts are exactly the expected ones, ``N g(E) exp(-E / T) / Z``, down to the rarest level."""
    levels, log_degeneracies = lattice_log_degeneracies(length)
    beta = 1 / np.array(temperatures)
    runs = []
    for b in beta:
        logs = log_degeneracies - b * levels
        share = np.exp(logs - logs.max())
        counts = samples * share / share.sum() / LEAVES
        runs.append(
            RunSums(
                place=np.arange(levels.size),
                sums=(np.tile(counts, (LEAVES, 1)),),
                rows=np.full(LEAVES, samples / LEAVES).astype(np.int64),
            )
        )
    assembly = Assembly(
        keys=levels,
        energies=levels,
        reference=0.0,
        order=1,
        width=1.0,
        discrete=True,
        runs=tuple(runs),
        matrix=np.ones((1, 1)),
    )
    ones = np.ones(beta.size)
    estimate = Estimate.solved(
        assembly,
        [COUNT],
        beta,
        [0] * beta.size,
        ones,
        ones,
        lambda per_run, counts, beta, energies: solve(
            per_run.sum(axis=0), counts, beta, energies, pairwise_start(per_run, counts, beta, energies)
        ),
    )
    return DensityOfStates(description=Description(), runs=(), estimate=estimate)


def difference_from(answer, energy, exact: np.ndarray) -> np.ndarray:
    """Exact ln g relative to the level at which the answer is zero."""
    return exact - exact[np.flatnonzero(energy == answer.attrs["reference_energy"])[0]]


@pytest.mark.parametrize("length", [4, 8])
def test_expected_counts_give_back_the_exact_density_of_states(length: int) -> None:
    """No sampling, no noise: one constant is free, the rest holds to rounding."""
    answer = rw.states(fed_with_expected_counts(length, [1.5, 2.0, 2.5, 4.0, math.inf], samples=64e6))

    levels, log_degeneracies = lattice_log_degeneracies(length)
    np.testing.assert_array_equal(answer.energy, levels)
    # Even the rarest level, with 1e-12 expected visits of 64 million, must be right.
    np.testing.assert_allclose(
        answer[LN_G], difference_from(answer, levels, log_degeneracies), rtol=0, atol=1e-10
    )


def test_every_well_visited_level_is_right_within_its_own_error() -> None:
    levels, log_degeneracies = lattice_log_degeneracies(16)
    temperatures = [1.9, 2.15, 2.3, 2.45, 2.7]
    rng = np.random.default_rng(613)
    runs = {
        str(t): draw_levels(levels, log_degeneracies, t, 20_000, rng, coefficient=0.8) for t in temperatures
    }

    answer = rw.states(rw.combine(runs, temperatures=temperatures))

    seen = answer.independent_samples.to_numpy() >= 50
    assert seen.sum() > 70
    exact = difference_from(
        answer, answer.energy.to_numpy(), np.interp(answer.energy, levels, log_degeneracies)
    )
    error = answer[f"{LN_G}_standard_error"].to_numpy()
    off = np.abs(answer[LN_G].to_numpy() - exact)
    assert np.all(off[seen] <= 4 * error[seen])
    assert np.all(error[seen] < 0.25)  # 50 visits alone leave 0.14; the ladder of differences adds to it
    assert np.count_nonzero(error[seen] == 0) == 1  # the reference itself


@pytest.mark.parametrize(
    ("length", "temperatures", "energy"),
    [(8, [2.0, 2.3, 2.7, 3.5], -60.0), (16, [2.15, 2.3, 2.5], -400.0)],
    ids=["8x8", "16x16, many levels equally often visited"],
)
def test_intervals_of_ln_g_differences_hold_the_truth_as_often_as_they_say(
    length, temperatures, energy
) -> None:
    """400 experiments, 100 independent samples a run; a right program fails with a probability of 1e-4 a case.

    The second case catches a reference chosen because its visits fluctuated upwards: counted from the most visited
    level, the intervals near it hold the truth 81 % of the time.
    """
    levels, log_degeneracies = lattice_log_degeneracies(length)
    rng = np.random.default_rng(77)
    series = [
        draw_levels(levels, log_degeneracies, t, 1900, rng, coefficient=0.9, series=400) for t in temperatures
    ]
    held, asked = 0, 0
    for experiment in range(400):
        runs = {str(t): draws[experiment] for t, draws in zip(temperatures, series, strict=True)}
        answer = rw.states(rw.combine(runs, temperatures=temperatures, discard=0))
        if answer.attrs["reference_energy"] == energy:
            continue
        exact = difference_from(
            answer, answer.energy.to_numpy(), np.interp(answer.energy, levels, log_degeneracies)
        )
        place = int(np.flatnonzero(answer.energy == energy)[0])
        lower, upper = answer[f"{LN_G}_interval"].to_numpy()[place]
        held += lower <= exact[place] <= upper
        asked += 1

    assert asked > 350
    assert binom.ppf(0.5e-4, asked, 0.95) <= held <= binom.ppf(1 - 0.5e-4, asked, 0.95)


def test_bins_of_a_gaussian_density_of_states_agree_with_their_integrals() -> None:
    """g(E) ~ exp(-E**2 / (2 s**2)): a bin holds a difference of two normal distribution functions."""
    width, temperatures = 10.0, [8.0, 12.0, 20.0, math.inf]
    rng = np.random.default_rng(31)
    runs = {str(t): draw_gaussian(width, t, 20_000, rng, coefficient=0.5) for t in temperatures}

    answer = rw.states(rw.combine(runs, temperatures=temperatures))

    lower, upper = (answer[f"energy_{end}"].to_numpy() / width for end in ("lower", "upper"))
    # ln(Phi(u) - Phi(l)) from the tail that keeps its digits.
    low, high = (np.where(lower + upper > 0, -edge, edge) for edge in (upper, lower))
    low, high = np.minimum(low, high), np.maximum(low, high)
    exact = log_ndtr(high) + np.log1p(-np.exp(log_ndtr(low) - log_ndtr(high)))
    assert_bins_agree(answer, exact)


def test_bins_of_a_power_law_density_of_states_agree_with_their_integrals() -> None:
    """g(E) ~ E**(a - 1): a bin holds (u**a - l**a) / a."""
    shape, temperatures = 25.0, [0.8, 1.0, 1.25]
    rng = np.random.default_rng(32)
    runs = {str(t): draw_gamma(shape, t, 20_000, rng, coefficient=0.5) for t in temperatures}

    answer = rw.states(rw.combine(runs, temperatures=temperatures), bin_width=1.0)

    lower, upper = (answer[f"energy_{end}"].to_numpy() for end in ("lower", "upper"))
    assert_bins_agree(answer, shape * np.log(upper) + np.log1p(-((lower / upper) ** shape)))


def assert_bins_agree(answer, log_integral: np.ndarray) -> None:
    exact = difference_from(answer, answer.energy.to_numpy(), log_integral)
    seen = answer.independent_samples.to_numpy() >= 50
    error = answer[f"{LN_G}_standard_error"].to_numpy()
    assert seen.sum() > 15
    off = np.abs(answer[LN_G].to_numpy() - exact)
    assert np.all(off[seen] <= 4 * error[seen])
    assert np.all(error[seen] < 0.25)
    # Centre times width would do for a smooth curve, not for these: the test can tell the two apart.
    assert np.ptp(exact[seen]) > 5


def test_a_wide_bin_holds_the_states_of_the_narrow_bins_in_it(oscillators) -> None:
    finest = oscillators.estimate.assembly.width
    narrow, wide = (rw.states(oscillators, bin_width=n * finest) for n in (2, 6))

    shift = None
    for place in range(wide.sizes["energy"]):
        inside = (narrow.energy > wide.energy_lower[place]) & (narrow.energy < wide.energy_upper[place])
        summed = np.logaddexp.reduce(narrow[LN_G].to_numpy()[inside.to_numpy()]) - math.log(3)
        difference = float(wide[LN_G][place]) - summed
        shift = difference if shift is None else shift  # the two are zero at different energies
        assert difference == pytest.approx(shift, abs=1e-10)


# --- the constant -----------------------------------------------------------------------------------------------------


def test_a_declared_number_of_states_makes_every_level_absolute(lattice) -> None:
    """States 2**64 of the 8 x 8 lattice, anchored by a run at infinite temperature: ground level 2 states, and so on."""
    answer = rw.states(lattice, absolute=True)

    levels, log_degeneracies = lattice_log_degeneracies(8)
    exact = np.interp(answer.energy, levels, log_degeneracies)
    seen = answer.independent_samples.to_numpy() >= 50
    error = answer[f"{LN_G}_standard_error"].to_numpy()
    assert seen.sum() > 30
    off = np.abs(answer[LN_G].to_numpy() - exact)
    assert np.all(off[seen] <= 4 * error[seen])
    assert np.all(error[seen] < 0.25)
    assert np.all(error > 0)  # no level is known beforehand
    assert answer.attrs["absolute"] == 1
    assert "reference_energy" not in answer.attrs


def test_absolute_counts_add_up_to_the_declared_number_of_states(lattice) -> None:
    answer = rw.states(lattice, absolute=True)

    total = np.logaddexp.reduce(answer[LN_G].to_numpy())
    assert total == pytest.approx(64 * math.log(2), abs=1e-10)


def lattice_with(length: int, temperatures: list[float], **keys) -> rw.DensityOfStates:
    levels, log_degeneracies = lattice_log_degeneracies(length)
    rng = np.random.default_rng(5)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 8000, rng) for t in temperatures}
    return rw.combine(runs, temperatures=temperatures, **keys)


def test_a_well_visited_ground_level_of_known_degeneracy_makes_the_others_absolute() -> None:
    answer = rw.states(lattice_with(8, [1.8, 2.2, 2.7], ground_degeneracy=2), absolute=True)

    levels, log_degeneracies = lattice_log_degeneracies(8)
    exact = np.interp(answer.energy, levels, log_degeneracies)
    error = answer[f"{LN_G}_standard_error"].to_numpy()
    seen = answer.independent_samples.to_numpy() >= 50
    assert answer[LN_G].to_numpy()[0] == pytest.approx(math.log(2), abs=1e-12)
    assert error[0] == 0
    assert np.all(np.abs(answer[LN_G].to_numpy() - exact)[1:][seen[1:]] <= 4 * error[1:][seen[1:]])
    assert np.all(error[seen] < 0.25)


def test_absolute_values_are_refused_when_infinite_temperature_was_never_seen() -> None:
    """Forcing the seen levels to sum to 2**256 would shift every ln g of this lattice by about +10."""
    combined = lattice_with(16, [2.3, 2.6, 3.0], states="2^256")

    with pytest.raises(rw.OutOfReachError, match=r"hottest run is at 3, .* Add runs up to beta = 0"):
        rw.states(combined, absolute=True)
    assert rw.states(combined).attrs["absolute"] == 0  # relative values are not refused


def test_absolute_values_are_refused_when_nothing_is_declared(small_lattice) -> None:
    with pytest.raises(
        rw.InputError, match=r"number of states or a ground degeneracy; the study declares neither"
    ):
        rw.states(small_lattice, absolute=True)


def test_a_ground_degeneracy_is_refused_when_the_ground_level_is_rarely_visited() -> None:
    combined = lattice_with(8, [3.2, 3.8], ground_degeneracy=2)

    with pytest.raises(rw.OutOfReachError, match=r"at least 30 independent times.*Add a colder run"):
        rw.states(combined, absolute=True)


@pytest.mark.parametrize("kind", ["levels in bins", "continuous energies"])
def test_a_ground_degeneracy_is_refused_for_bins(kind: str) -> None:
    if kind == "levels in bins":
        combined, width = lattice_with(8, [1.8, 2.2], ground_degeneracy=2), 16.0
    else:
        rng = np.random.default_rng(1)
        combined = rw.combine(
            {"a": rng.gamma(20.0, 1.0, 2000), "b": rng.gamma(20.0, 1.2, 2000)},
            temperatures=[1.0, 1.2],
            ground_degeneracy=2,
        )
        width = None

    with pytest.raises(rw.InputError, match=r"of levels only; these answers are per bin"):
        rw.states(combined, absolute=True, bin_width=width)


# --- bins -------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("asked", "panels"), [(None, 2), (1.0, 1), (3.4, 3), (5.6, 6)])
def test_bins_are_whole_multiples_of_the_finest_kept(oscillators, asked, panels) -> None:
    finest = oscillators.estimate.assembly.width
    answer = rw.states(oscillators, bin_width=None if asked is None else asked * finest)

    width = panels * finest
    lower = answer.energy_lower.to_numpy()
    np.testing.assert_allclose(answer.energy_upper.to_numpy() - lower, width, rtol=1e-12)
    np.testing.assert_allclose(lower / width, np.rint(lower / width), atol=1e-9)
    assert answer.attrs["bins"] == f"width {width:g}"


@pytest.mark.parametrize(
    ("width", "message"),
    [
        (0.9, r"at least .*, the finest that was kept; got .* Set resolution"),
        (0.0, r"positive and finite; got 0"),
        (-2.0, r"positive and finite; got -"),
        (math.nan, r"positive and finite; got nan"),
        (math.inf, r"positive and finite; got inf"),
        (1e300, r"at most .*, the range of the sampled energies; got .*energy unit\?"),
    ],
)
def test_an_unusable_bin_width_is_refused(oscillators, width, message) -> None:
    finest = oscillators.estimate.assembly.width
    with pytest.raises(rw.InputError, match=message):
        rw.states(oscillators, bin_width=width * finest)
    with pytest.raises(rw.InputError, match=message):
        rw.distribution(oscillators, 300.0, bin_width=width * finest)


def test_bins_narrower_than_the_distance_between_levels_are_refused(lattice) -> None:
    with pytest.raises(rw.InputError, match=r"at least 4, the distance between levels; got 3"):
        rw.states(lattice, bin_width=3.0)


def test_bins_of_levels_hold_the_sum_of_their_levels(lattice) -> None:
    """Sixteen energy units hold four levels, five where a level lies on the upper edge and belongs to the next bin."""
    single, binned = rw.states(lattice, absolute=True), rw.states(lattice, absolute=True, bin_width=16.0)

    for place in range(binned.sizes["energy"]):
        inside = (single.energy >= binned.energy_lower[place]) & (single.energy < binned.energy_upper[place])
        expected = np.logaddexp.reduce(single[LN_G].to_numpy()[inside.to_numpy()]) - math.log(16.0)
        assert float(binned[LN_G][place]) == pytest.approx(expected, abs=1e-10)


def test_an_unsound_level_is_marked_and_one_level_alone_is_answered() -> None:
    levels, log_degeneracies = ladder_levels(30)
    rng = np.random.default_rng(2)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 3000, rng) for t in (1.0, 1.5)}
    combined = rw.combine(runs, temperatures=[1.0, 1.5])

    answer = rw.states(combined)

    marked = ~answer.well_visited.to_numpy()
    np.testing.assert_array_equal(marked, answer.independent_samples.to_numpy() < 10)
    assert marked.any()
    assert not marked.all()


def test_a_level_of_confidence_outside_zero_and_one_is_refused(lattice) -> None:
    with pytest.raises(rw.InputError, match=r"level must lie between 0 and 1; got 95.*0\.95"):
        rw.states(lattice, level=95)


def test_wider_confidence_gives_wider_intervals_around_the_same_values(lattice) -> None:
    narrow, wide = rw.states(lattice, level=0.8), rw.states(lattice, level=0.99)

    np.testing.assert_array_equal(narrow[LN_G], wide[LN_G])
    spread = [np.ptp(each[f"{LN_G}_interval"].to_numpy(), axis=1) for each in (narrow, wide)]
    moved = narrow[f"{LN_G}_standard_error"].to_numpy() > 0
    assert np.all(spread[0][moved] < spread[1][moved])


def test_levels_that_only_a_transient_visited_are_no_levels() -> None:
    rng = np.random.default_rng(3)
    levels, log_degeneracies = lattice_log_degeneracies(8)
    runs = {f"{t}": draw_levels(levels, log_degeneracies, t, 4000, rng) for t in (2.0, 2.3)}
    runs["2.0"][:100] = 96.0  # started hot: a level that no equilibrated sample reaches

    combined = rw.combine(runs, temperatures=[2.0, 2.3], discard=200)

    assert 96.0 in combined.estimate.assembly.keys
    for answer in (rw.states(combined), rw.distribution(combined, 2.1)):
        assert 96.0 not in answer.energy
    assert (rw.states(combined).independent_samples > 0).all()
    assert float(rw.distribution(combined, 2.1).probability.sum()) == pytest.approx(1, abs=1e-12)


def test_of_two_declared_anchors_the_one_that_was_sampled_is_used() -> None:
    rng = np.random.default_rng(4)
    levels, log_degeneracies = lattice_log_degeneracies(8)
    runs = {f"{t}": draw_levels(levels, log_degeneracies, t, 8000, rng) for t in (1.8, 2.1)}

    combined = rw.combine(runs, temperatures=[1.8, 2.1], states="2^64", ground_degeneracy=2)

    answer = rw.states(combined, absolute=True)
    assert float(answer[LN_G][0]) == pytest.approx(math.log(2), abs=1e-12)  # two ground states
    off = rw.combine(runs, temperatures=[1.8, 2.1], states="2^64")
    with pytest.raises(rw.OutOfReachError, match="infinite temperature"):
        rw.states(off, absolute=True)
