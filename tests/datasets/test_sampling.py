"""Draws against the exact distributions they come from.

Bounds are 4 standard errors (about 1 false alarm in 16,000 a comparison), seeds are fixed.  The variance of a mean of an
autoregression is known exactly: (1 / N) [(1 + phi) / (1 - phi) - 2 phi (1 - phi**N) / (N (1 - phi)**2)] in units of the
variance (Priestley, Spectral Analysis and Time Series (1981); from memory).  Means over independent series give the error
bars of everything else, without any assumption about the correlation.
"""

import numpy as np
import pytest

from reweight.datasets import exact_models, sampling
from reweight.datasets.exact import canonical, canonical_mean, lattice_log_degeneracies

# phi, N: variance of the mean, printed table of the formula above
VARIANCE_OF_MEAN = {
    (0.0, 100): 0.01,
    (0.5, 1000): 0.002996,
    (0.9, 100): 0.1720004781052,
    (0.99, 1000): 0.1792008547907,
    (-0.5, 100): 0.003377777777778,
}
SERIES = 2000


def assert_mean(values, expected):
    """Mean over independent rows within 4 of its standard errors, which must be small enough to count."""
    means = values.mean(axis=1)
    standard_error = means.std(ddof=1) / np.sqrt(means.size)
    assert abs(means.mean() - expected) < 4 * standard_error
    assert standard_error < 0.02 * values.std()


@pytest.mark.parametrize(("coefficient", "count"), VARIANCE_OF_MEAN)
def test_means_of_the_autoregression_scatter_as_the_formula_says(coefficient, count):
    """The relative standard error of a variance from S independent normal means is sqrt(2 / S)."""
    rng = np.random.default_rng(1)
    draws = sampling.correlated_normals(count, coefficient, rng, series=SERIES)

    ratio = np.mean(draws.mean(axis=1) ** 2) / VARIANCE_OF_MEAN[coefficient, count]
    assert abs(ratio - 1) < 4 * np.sqrt(2 / SERIES)


@pytest.mark.parametrize("lag", [1, 3])
def test_the_autoregression_is_stationary_and_decays_geometrically(lag):
    """Correlation of the first draw with a later one over 20,000 series: standard error at most 1 / sqrt(20,000)."""
    draws = sampling.correlated_normals(5, 0.8, np.random.default_rng(2), series=20_000)

    assert abs(np.mean(draws[:, 0] * draws[:, lag]) - 0.8**lag) < 4 * np.sqrt(2 / 20_000)
    assert np.all(abs(np.var(draws, axis=0) - 1) < 4 * np.sqrt(2 / 20_000))


@pytest.mark.parametrize("coefficient", [0.0, 0.8])
@pytest.mark.parametrize("temperature", [2.3, np.inf])
def test_level_draws_have_the_exact_moments(temperature, coefficient):
    levels = lattice_log_degeneracies(8)
    draws = sampling.draw_levels(
        *levels, temperature, 400, np.random.default_rng(3), coefficient=coefficient, series=SERIES
    )
    answer = canonical(*levels, temperature)
    square = canonical_mean(*levels, levels[0] ** 2, temperature)[0]

    assert_mean(draws, answer.mean_energy[0])
    assert_mean(draws**2, square)


@pytest.mark.parametrize("coefficient", [0.0, 0.8])
def test_every_level_is_drawn_as_often_as_its_weight(coefficient):
    """Each level of the 4 x 4 lattice with a probability above 1 %."""
    energies, logarithms = lattice_log_degeneracies(4)
    rng = np.random.default_rng(4)
    draws = sampling.draw_levels(energies, logarithms, 2.4, 400, rng, coefficient=coefficient, series=SERIES)
    weights = np.exp(logarithms - energies / 2.4)
    probabilities = weights / weights.sum()

    frequent = energies[probabilities > 0.01]
    assert frequent.size > 5
    for energy in frequent:
        assert_mean((draws == energy).astype(float), probabilities[energies == energy][0])


def test_correlated_levels_lose_no_more_samples_than_the_autoregression():
    """The map can only lower the inefficiency (1 + phi) / (1 - phi) = 9; lattice energies keep most of it."""
    levels = lattice_log_degeneracies(8)
    rng = np.random.default_rng(5)
    draws = sampling.draw_levels(*levels, 2.3, 1000, rng, coefficient=0.8, series=SERIES)
    temperature_squared = 2.3**2
    inefficiency = (
        1000 * np.var(draws.mean(axis=1)) / (canonical(*levels, 2.3).heat_capacity[0] * temperature_squared)
    )

    assert inefficiency < 9 * (1 + 4 * np.sqrt(2 / SERIES))
    assert inefficiency > 9 * 0.75


@pytest.mark.parametrize("coefficient", [0.0, 0.7])
def test_gamma_draws_have_the_moments_of_equipartition(coefficient):
    """<E> = a T, <E**2> = a (a + 1) T**2."""
    draws = sampling.draw_gamma(
        7.5, 2.0, 300, np.random.default_rng(6), coefficient=coefficient, series=SERIES
    )

    assert_mean(draws, 15.0)
    assert_mean(draws**2, 7.5 * 8.5 * 4.0)


@pytest.mark.parametrize("coefficient", [0.0, 0.7])
def test_gaussian_draws_have_constant_width_and_a_shifted_mean(coefficient):
    draws = sampling.draw_gaussian(
        3.0, 2.0, 300, np.random.default_rng(7), coefficient=coefficient, series=SERIES
    )

    assert_mean(draws, -4.5)
    assert_mean((draws + 4.5) ** 2, 9.0)


@pytest.mark.parametrize("joint", [exact_models.lattice_joint_levels(), exact_models.curie_weiss_levels(16)])
@pytest.mark.parametrize("coefficient", [0.0, 0.8])
def test_joint_draws_keep_energy_and_observable_together(joint, coefficient):
    """Both means, and the mean of the product, which a wrong pairing would miss."""
    rng = np.random.default_rng(8)
    energies, observable = sampling.draw_joint(joint, 2.0, 400, rng, coefficient=coefficient, series=SERIES)

    def exact(values):
        return canonical_mean(joint.energies, joint.log_degeneracies, values, 2.0)[0]

    assert_mean(energies, exact(joint.energies))
    assert_mean(observable, exact(joint.observable))
    assert_mean(energies * observable, exact(joint.energies * joint.observable))


def test_one_series_has_no_axis_of_its_own():
    rng = np.random.default_rng(9)

    assert sampling.draw_levels([0.0, 1.0], [0.0, 0.0], 1.0, 7, rng).shape == (7,)
    assert sampling.draw_gamma(2.0, 1.0, 7, rng).shape == (7,)
    assert sampling.draw_gaussian(2.0, 1.0, 7, rng, series=1).shape == (1, 7)


@pytest.mark.parametrize("coefficient", [-1.0, 1.0, 1.5, np.nan])
def test_a_correlation_that_never_decays_is_refused(coefficient):
    with pytest.raises(ValueError, match="coefficient must lie between -1 and 1"):
        sampling.correlated_normals(10, coefficient, np.random.default_rng(10))
