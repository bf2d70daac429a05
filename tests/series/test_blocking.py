"""Blocking curves of autoregressive series against the exact variance of their means.

x_(t+1) = phi x_t + sqrt(1 - phi**2) z_t: the mean of N values has the variance
(1/N) [(1 + phi)/(1 - phi) - 2 phi (1 - phi**N) / (N (1 - phi)**2)].  Sources: M. B. Priestley, Spectral Analysis and Time
Series (1981); H. Mueller-Krumbhaar and K. Binder, J. Stat. Phys. 8, 1 (1973) (from memory; also checked by direct sums).
"""

from __future__ import annotations

import numpy as np
import pytest

from reweight.datasets.sampling import correlated_normals
from reweight.series.blocking import blocking

LENGTH = 4096
VARIANCE_OF_MEAN = {
    (0.0, 1000): 0.001,
    (0.9, 1000): 0.01882,
    (0.99, 1000): 0.1792008547907,
    (0.9, 100): 0.1720004781052,
}


def variance_of_mean(coefficient: float, count: int) -> float:
    gap = 1 - coefficient
    return ((1 + coefficient) / gap - 2 * coefficient * (1 - coefficient**count) / (count * gap**2)) / count


@pytest.mark.parametrize("case", VARIANCE_OF_MEAN)
def test_the_closed_form_gives_the_tabulated_values(case: tuple[float, int]) -> None:
    assert variance_of_mean(*case) == pytest.approx(VARIANCE_OF_MEAN[case], rel=1e-9)


@pytest.mark.parametrize("coefficient", [0.0, 0.9, 0.99])
def test_every_point_of_the_curve_has_its_exact_expectation(coefficient: float) -> None:
    """E[c0 / (n - 1)] = (var(mean of a block) - var(mean of all)) / (n - 1) for n blocks; bound of 4.5 standard errors.

    Thirteen points in three cases: one false alarm in 4000 if normal, and the seed is fixed.
    """
    curves = [
        blocking(series)
        for series in correlated_normals(LENGTH, coefficient, np.random.default_rng(31), series=400)
    ]
    squares = np.array([curve.error_of_mean for curve in curves]) ** 2
    lengths, counts = curves[0].block_length, curves[0].block_count

    assert lengths.tolist() == [2**k for k in range(12)]
    assert counts.tolist() == [LENGTH // 2**k for k in range(12)]
    whole = variance_of_mean(coefficient, LENGTH)
    expected = np.array([variance_of_mean(coefficient, int(b)) - whole for b in lengths]) / (counts - 1)
    error = squares.std(axis=0) / np.sqrt(len(curves))
    assert (np.abs(squares.mean(axis=0) - expected) < 4.5 * error).all()


def test_the_curve_of_correlated_samples_rises_to_a_plateau_that_is_the_true_error() -> None:
    curve = blocking(correlated_normals(2**18, 0.9, np.random.default_rng(32)))
    true = np.sqrt(variance_of_mean(0.9, 2**18))

    assert curve.error_of_mean[0] == pytest.approx(true / np.sqrt(19), rel=0.05)  # too small by sqrt(g)
    flat = (curve.block_length >= 256) & (curve.block_count >= 64)
    assert flat.sum() >= 4
    assert (np.abs(curve.error_of_mean - true) < 4 * curve.uncertainty)[flat].all()


def test_the_stated_uncertainty_is_that_of_repetitions() -> None:
    """300 repetitions of independent samples know a spread to 4 %."""
    curves = [blocking(series) for series in np.random.default_rng(33).standard_normal((300, 1024))]
    spread = np.std([curve.error_of_mean for curve in curves], axis=0)
    stated = np.mean([curve.uncertainty for curve in curves], axis=0)

    np.testing.assert_allclose(spread[:6], stated[:6], rtol=0.2)


def test_group_means_give_the_later_part_of_the_curve() -> None:
    series = correlated_normals(LENGTH, 0.9, np.random.default_rng(34))

    whole = blocking(series)
    later = blocking(series.reshape(-1, 8).mean(axis=1), group=8)

    np.testing.assert_array_equal(later.block_length, whole.block_length[3:])
    np.testing.assert_allclose(later.error_of_mean, whole.error_of_mean[3:], rtol=1e-12)


def test_a_rest_that_fills_no_block_is_left_out() -> None:
    curve = blocking(np.arange(7.0))

    assert curve.block_count.tolist() == [7, 3]
    assert curve.error_of_mean[1] == pytest.approx(np.std([0.5, 2.5, 4.5]) / np.sqrt(2))


def test_a_constant_series_has_no_error() -> None:
    assert (blocking(np.full(64, 2.5)).error_of_mean == 0).all()
