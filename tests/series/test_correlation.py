"""Statistical inefficiency of autoregressive series against their closed form, and against a naive sum.

x_(t+1) = phi x_t + sqrt(1 - phi**2) z_t has g = 1 + 2 sum rho = (1 + phi) / (1 - phi).  Source: M. B. Priestley,
Spectral Analysis and Time Series (1981) (from memory); the values were also checked by direct summation.

Bounds of 4 standard errors: one false alarm in 16,000 per comparison if the errors are normal; seeds are fixed.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive import group_means
from naive import statistical_inefficiency as naive_inefficiency

from reweight.datasets.sampling import correlated_normals
from reweight.series.correlation import autocovariance, shrink, statistical_inefficiency

INEFFICIENCY = {0.0: 1.0, 0.5: 3.0, 0.8: 9.0, 0.9: 19.0, 0.95: 39.0, 0.99: 199.0}


@pytest.mark.parametrize("coefficient", INEFFICIENCY)
def test_the_inefficiency_of_an_autoregression_is_found_within_its_own_error(coefficient: float) -> None:
    series = correlated_normals(100_000, coefficient, np.random.default_rng(20240612))
    found = statistical_inefficiency(series)

    expected = INEFFICIENCY[coefficient]
    assert abs(found.value - expected) < 4 * found.standard_error
    assert 0 < found.standard_error < 0.15 * expected  # else the line above proves nothing
    assert not found.constant


@pytest.mark.parametrize("group", [8, 128])
@pytest.mark.parametrize("coefficient", [0.9, 0.99])
def test_group_means_tell_the_inefficiency_of_their_samples(coefficient: float, group: int) -> None:
    series = correlated_normals(2**19, coefficient, np.random.default_rng(5))
    groups = series.reshape(-1, group)

    found = statistical_inefficiency(
        groups.mean(axis=1), group=group, within_variance=float(groups.var(axis=1).mean())
    )

    expected = INEFFICIENCY[coefficient]
    # Groups longer than the correlation cost resolution: the window cannot be shorter than one group.
    assert abs(found.value - expected) < 4 * found.standard_error + 0.05 * expected
    assert found.standard_error < 0.15 * expected


def test_without_the_variance_inside_groups_the_inefficiency_would_be_too_large() -> None:
    """Negative control: 306 instead of 199 at groups of 128 (own simulation)."""
    groups = correlated_normals(2**19, 0.99, np.random.default_rng(5)).reshape(-1, 128)

    assert statistical_inefficiency(groups.mean(axis=1), group=128).value > 1.3 * 199


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("coefficient", [0.0, 0.6, 0.95, -0.5])
def test_the_estimate_agrees_with_a_sum_by_loops(coefficient: float, seed: int) -> None:
    series = 100 + correlated_normals(500, coefficient, np.random.default_rng(seed))

    assert statistical_inefficiency(series).value == pytest.approx(naive_inefficiency(series), rel=1e-10)


def test_its_error_is_that_of_repeated_estimates() -> None:
    """The quoted formula is a little wide (pulls 0.86-0.93 measured); 200 repetitions know a spread to 5 %."""
    found = [
        statistical_inefficiency(series)
        for series in correlated_normals(4000, 0.9, np.random.default_rng(6), series=200)
    ]
    spread = np.std([each.value for each in found])
    quoted = np.mean([each.standard_error for each in found])

    assert 0.7 < spread / quoted < 1.2
    assert np.mean([each.value for each in found]) == pytest.approx(19, rel=0.05)


@pytest.mark.parametrize("value", [0.0, 1.0, -1234.5678, 1e12 / 3])
@pytest.mark.parametrize("count", [1, 3, 100])
def test_a_constant_series_is_one_independent_sample(value: float, count: int) -> None:
    found = statistical_inefficiency(np.full(count, value))

    assert found.constant
    assert found.value == count


def test_the_autocovariance_is_that_of_the_definition() -> None:
    series = np.random.default_rng(7).standard_normal(50)
    difference = series - series.mean()

    expected = [sum(difference[i] * difference[i + lag] for i in range(50 - lag)) / 50 for lag in range(50)]
    np.testing.assert_allclose(autocovariance(series), expected, atol=1e-14)


@given(st.integers(4, 200), st.floats(-1e6, 1e6), st.floats(1e-3, 1e3))
@settings(max_examples=50)
def test_shift_and_scale_of_a_series_do_not_matter(count: int, shift: float, scale: float) -> None:
    series = np.random.default_rng(count).standard_normal(count)

    one, other = statistical_inefficiency(series), statistical_inefficiency(shift + scale * series)

    assert 1 <= one.value <= count
    assert other.value == pytest.approx(one.value, rel=1e-4)


def test_thinning_agrees_with_naive_groups() -> None:
    series = np.random.default_rng(8).standard_normal(1000)

    np.testing.assert_allclose(group_means(series, 8), series.reshape(-1, 8).mean(axis=1), rtol=1e-13)


def test_inefficiencies_that_differ_by_less_than_their_errors_become_one() -> None:
    values, windows, counts = np.array([18.0, 20.0, 19.0]), np.array([60, 60, 60]), np.full(3, 2000.0)

    shrunk = shrink(values, windows, counts)

    assert np.ptp(shrunk) < 1e-12
    assert 18 < shrunk[0] < 20


def test_inefficiencies_that_differ_by_much_more_than_their_errors_stay() -> None:
    values, windows, counts = np.array([3.0, 19.0, 199.0]), np.array([10, 60, 600]), np.full(3, 1e7)

    np.testing.assert_allclose(shrink(values, windows, counts), values, rtol=1e-3)


def test_the_inefficiency_of_a_single_run_stays() -> None:
    assert shrink(np.array([7.0]), np.array([20]), np.array([1000.0]))[0] == pytest.approx(7)
