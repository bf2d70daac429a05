"""Peaks found again in resamples, on curves whose maxima are known."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.answers.peak_resampling import find_again


def bumps(grid: np.ndarray, *each: tuple[float, float]) -> np.ndarray:
    return sum(height * np.exp(-((grid - centre) ** 2)) for centre, height in each)


GRID = np.concatenate([np.linspace(-4, 0, 41), np.linspace(0.05, 4, 80)])


def test_maxima_are_found_between_grid_points():
    centres = np.linspace(-0.9, 0.9, 37)
    resampled = np.array([bumps(GRID, (centre, 2.0 + centre)) for centre in centres])
    full = bumps(GRID, (0.0, 2.0))

    (found,) = find_again(GRID, full, resampled, [int(np.argmax(full))])

    np.testing.assert_allclose(found.beta, centres, atol=2e-5)
    np.testing.assert_allclose(found.height, 2.0 + centres, rtol=2e-6)
    assert found.full_beta == pytest.approx(0.0, abs=2e-5)
    assert found.highest_share == 1.0


def test_competing_maxima_share_the_resamples():
    full = bumps(GRID, (-2.0, 1.0), (2.0, 1.1))
    resampled = np.array([bumps(GRID, (-2.0, 1.0), (2.0, height)) for height in (0.8, 0.9, 1.05, 1.2)])
    places = [int(np.argmax(np.where(GRID < 0, full, 0))), int(np.argmax(full))]

    low, high = find_again(GRID, full, resampled, places)

    assert low.highest_share == 0.5
    assert high.highest_share == 0.5
    np.testing.assert_allclose(low.beta, -2.0, atol=1e-3)


def test_a_maximum_that_a_resample_does_not_have_is_lost_there():
    full = bumps(GRID, (-2.0, 1.0), (2.0, 0.3))
    resampled = np.array([bumps(GRID, (-2.0, 1.0)), full, np.full(GRID.size, np.nan)])
    places = [int(np.argmax(full)), int(np.argmax(np.where(GRID > 0, full, 0)))]

    first, second = find_again(GRID, full, resampled, places)

    assert np.isnan(second.beta).tolist() == [True, False, True]
    assert np.isnan(first.beta).tolist() == [False, False, True]
    assert first.highest_share == 1.0  # of the resamples that have a solution


def test_spread_and_correlation_of_the_peak_agree_with_linear_response(lattice):
    """1000 resamples know a standard deviation to 2.2 %, a tail quantile to 4 %: 12 % of the width are allowed."""
    plain = rw.peaks(lattice)[0]
    resamples = rw.draw_resamples(lattice, 1000, seed=3)
    again = rw.peaks(lattice, resamples=resamples, resampled_intervals=True)[0]

    for name in ("temperature", "height", "temperature_standard_error", "height_standard_error"):
        assert getattr(again, name) == getattr(plain, name)
    assert abs(again.correlation - plain.correlation) < 0.2
    assert abs(again.temperature_bias) < 0.25 * again.temperature_standard_error
    width = again.temperature_interval[1] - again.temperature_interval[0]
    assert width == pytest.approx(plain.temperature_interval[1] - plain.temperature_interval[0], rel=0.12)
    assert plain.temperature_bias is None
    assert plain.highest_share is None


def test_resamples_of_other_runs_are_refused(lattice, small_lattice):
    with pytest.raises(rw.InputError, match="of others"):
        rw.peaks(lattice, resamples=rw.draw_resamples(small_lattice, 10))


def test_a_curve_without_an_interior_maximum_is_not_looked_for_again(oscillators):
    (edge,) = rw.peaks(oscillators, of="energy", resamples=rw.draw_resamples(oscillators, 10))

    assert edge.at_edge
    assert edge.highest_share is None
