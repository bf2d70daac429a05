"""Where a run starts to be usable, on series whose start is known: an exponential decay onto an autoregression."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binom

from reweight.datasets.sampling import correlated_normals
from reweight.series.correlation import statistical_inefficiency
from reweight.series.transient import (
    independent_samples,
    least_error_start,
    start_difference,
    transient_length,
)

LENGTH = 4000


def decaying(rng: np.random.Generator, size: float, time: float, coefficient: float = 0.8) -> np.ndarray:
    return correlated_normals(LENGTH, coefficient, rng) + size * np.exp(-np.arange(LENGTH) / time)


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("time", [20.0, 100.0])
@pytest.mark.parametrize("seed", range(3))
def test_an_exponential_start_is_cut_where_it_sinks_into_the_noise(
    time: float, sign: float, seed: int
) -> None:
    """A decay from 20 standard deviations is down to the noise after ln 20 = 3 times and to 0.05 after 6."""
    found = transient_length(decaying(np.random.default_rng(seed), 20.0 * sign, time))

    assert 3 * time <= found <= 16 * time


def test_what_is_left_has_no_bias_to_speak_of() -> None:
    """Off by less than half a standard error of the mean on average: 0.1 to 0.3 was measured."""
    pulls = []
    for series in range(40):
        run = decaying(np.random.default_rng(100 + series), 20.0, 50.0)
        rest = run[transient_length(run) :]
        pulls.append(rest.mean() / np.sqrt(9 / rest.size))  # g = 9 at a coefficient of 0.8
    # The mean of 40 pulls scatters by 0.16: 0.3 + 3 * 0.16.
    assert abs(np.mean(pulls)) < 0.8
    whole = decaying(np.random.default_rng(100), 20.0, 50.0)
    assert whole.mean() / np.sqrt(9 / LENGTH) > 3  # negative control: without a cut the bias is plain


@pytest.mark.parametrize("coefficient", [0.0, 0.8, 0.95])
def test_stationary_series_lose_little(coefficient: float) -> None:
    """Twice 0.1 to 4 % on average were measured."""
    lost = [
        transient_length(series) / LENGTH
        for series in correlated_normals(LENGTH, coefficient, np.random.default_rng(9), series=40)
    ]

    assert np.mean(lost) < 0.08
    assert np.median(lost) < 0.02


@pytest.mark.parametrize("wild", [1e3, -1e6, 1e12])
def test_one_wild_first_sample_does_not_hide_the_transient_after_it(wild: float) -> None:
    series = decaying(np.random.default_rng(10), 20.0, 100.0)
    series[0] = wild

    assert 300 <= transient_length(series) <= 1600


@pytest.mark.parametrize("wild", [1e3, -1e6, 1e12])
def test_one_wild_first_sample_of_a_stationary_series_costs_little(wild: float) -> None:
    series = correlated_normals(LENGTH, 0.8, np.random.default_rng(11))
    series[0] = wild

    assert 1 <= transient_length(series) < 0.1 * LENGTH


def test_a_start_that_never_ends_costs_at_most_three_quarters() -> None:
    assert transient_length(np.linspace(0.0, 1.0, 1000)) <= 750


def test_constant_and_short_series_lose_nothing() -> None:
    assert transient_length(np.full(1000, 3.7)) == 0
    assert transient_length(np.arange(39.0)) == 0


@pytest.mark.parametrize("offset", [0.0, 1e3])
@pytest.mark.parametrize("coefficient", [0.0, 0.9, 0.99, 0.9999])
@pytest.mark.parametrize("length", [44, 1000, 8192])
def test_all_starts_at_once_count_as_each_start_by_itself(
    length: int, coefficient: float, offset: float
) -> None:
    rng = np.random.default_rng(12)
    series = offset + correlated_normals(length, coefficient, rng) + 20 * np.exp(-np.arange(length) / 30)
    starts = np.unique(np.geomspace(1, length - 20, 25).astype(int)) - 1

    one_by_one = [(length - start) / statistical_inefficiency(series[start:]).value for start in starts]

    np.testing.assert_allclose(independent_samples(series, starts), one_by_one, rtol=1e-9)


def test_a_constant_rest_is_one_sample() -> None:
    series = np.concatenate([np.arange(30.0), np.full(100, 7.0)])

    assert independent_samples(series, np.array([0, 30, 60]))[1:].tolist() == [1.0, 1.0]


def test_what_is_far_quieter_than_the_start_is_measured_by_itself() -> None:
    rng = np.random.default_rng(13)
    series = np.concatenate([1e9 * rng.standard_normal(100), correlated_normals(400, 0.8, rng)])
    starts = np.array([0, 100, 200])

    one_by_one = [(500 - start) / statistical_inefficiency(series[start:]).value for start in starts]

    np.testing.assert_allclose(independent_samples(series, starts), one_by_one, rtol=1e-9)


# --- the second rule --------------------------------------------------------------------------------------------------


def naive_least_error_start(series: np.ndarray) -> int:
    """Loop over all starts in batches of five."""
    batches = [float(np.mean(series[place : place + 5])) for place in range(0, len(series) // 5 * 5, 5)]
    scores = []
    for start in range(len(batches) // 2 + 1):
        rest = batches[start:]
        mean = sum(rest) / len(rest)
        scores.append(sum((each - mean) ** 2 for each in rest) / len(rest) ** 2)
    return 5 * scores.index(min(scores))


@pytest.mark.parametrize("seed", range(5))
def test_the_second_rule_agrees_with_a_loop(seed: int) -> None:
    series = 100 + decaying(np.random.default_rng(seed), 5.0, 50.0)[:503]

    assert least_error_start(series) == naive_least_error_start(series)


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("time", [20.0, 100.0])
def test_the_second_rule_finds_an_exponential_start_too(time: float, sign: float) -> None:
    found = least_error_start(decaying(np.random.default_rng(14), 20.0 * sign, time))

    assert 2 * time <= found <= 8 * time


@pytest.mark.parametrize("wild", [1e3, -1e6, 1e12])
def test_one_wild_first_sample_does_not_blind_the_second_rule(wild: float) -> None:
    series = decaying(np.random.default_rng(15), 20.0, 100.0)
    series[0] = wild

    assert 200 <= least_error_start(series) <= 800
    stationary = correlated_normals(LENGTH, 0.8, np.random.default_rng(16))
    stationary[0] = wild
    assert 1 <= least_error_start(stationary) < 0.1 * LENGTH


def test_the_second_rule_leaves_constant_and_short_series_alone() -> None:
    assert least_error_start(np.full(1000, 3.7)) == 0
    assert least_error_start(np.arange(39.0)) == 0


def test_the_second_rule_takes_half_at_most() -> None:
    assert least_error_start(np.linspace(0.0, 1.0, 1000)) <= 500


@pytest.mark.parametrize("coefficient", [0.0, 0.9, 0.99])
@pytest.mark.parametrize("independent", [30, 100, 300])
def test_the_two_rules_hardly_ever_differ_on_stationary_series(coefficient: float, independent: int) -> None:
    """By more than 2 standard errors of the mean in at most 0.5 % of series; 1.5 % of those of 30 independent samples.

    200 series a case; more than the 99.9 % point of a binomial distribution would show a higher rate.
    """
    length = int(independent * (1 + coefficient) / (1 - coefficient))
    group = max(1, length // 2000)  # as runs are kept, and faster
    alarms = 0
    for series in correlated_normals(length, coefficient, np.random.default_rng(17), series=200):
        groups = series[: length // group * group].reshape(-1, group)
        means, within = groups.mean(axis=1), float(groups.var(axis=1).mean())
        one, other = transient_length(means), least_error_start(means)
        alarms += start_difference(means, one, other, group, within) > 2

    assert alarms <= binom.ppf(0.999, 200, 0.005 if independent >= 100 else 0.015)


def test_a_start_cut_too_early_differs_from_the_second_rule() -> None:
    """Negative control: a decay from 20 standard deviations of which nothing was left out."""
    series = decaying(np.random.default_rng(18), 20.0, 100.0)

    assert start_difference(series, 0, least_error_start(series), 1, 0.0) > 5


def test_a_difference_is_measured_in_standard_errors_of_what_is_left() -> None:
    """Jump of 1 after 1000 of 5000 independent samples: the mean moves by 0.2, its error is 1/sqrt(4000) = 0.0158."""
    series = np.random.default_rng(19).standard_normal(5000)
    series[:1000] += 1

    assert start_difference(series, 0, 1000, 1, 0.0) == pytest.approx(0.2 * np.sqrt(4000), rel=0.15)
    assert start_difference(series, 1000, 0, 1, 0.0) == start_difference(series, 0, 1000, 1, 0.0)
    assert start_difference(series, 1000, 1000, 1, 0.0) == 0
    groups = series.reshape(-1, 10)
    grouped = start_difference(groups.mean(axis=1), 0, 100, 10, float(groups.var(axis=1).mean()))
    assert grouped == pytest.approx(start_difference(series, 0, 1000, 1, 0.0), rel=0.2)


def test_a_constant_rest_after_another_start_differs_beyond_measure() -> None:
    series = np.concatenate([np.full(100, 1.0), np.full(400, 7.0)])

    assert start_difference(series, 0, 100, 1, 0.0) == np.inf
    assert start_difference(np.full(500, 7.0), 0, 100, 1, 0.0) == 0
