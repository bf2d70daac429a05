"""Where a run starts to be usable, on series whose start is known: an exponential decay onto an autoregression."""

from __future__ import annotations

import numpy as np
import pytest

from reweight.datasets.sampling import correlated_normals
from reweight.series.correlation import statistical_inefficiency
from reweight.series.transient import independent_samples, transient_length

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
