"""Two estimates of one correlation: they agree for one time scale and part for two.

x_(t+1) = phi x_t + sqrt(1 - phi**2) z_t has g = (1 + phi) / (1 - phi); a sum of two independent such series, of shares a
and 1 - a of the variance, has the mean of the two g with these weights.  Source: M. B. Priestley, Spectral Analysis and
Time Series (1981) (from memory).
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import binom

from reweight.datasets.sampling import correlated_normals
from reweight.series.correlation import Inefficiency
from reweight.series.time_scales import TimeScales, differ, time_scales

ONE_SCALE = {0.0: 1.0, 0.9: 19.0, 0.99: 199.0}
FAST, SLOW = 0.7, 0.99
G_FAST, G_SLOW = 17 / 3, 199.0


def scales_of(series: NDArray[np.float64]) -> TimeScales:
    """As a run does it: groups of samples, blocks of a hundredth of the run."""
    block = 1
    while series.size // block >= 128:
        block *= 2
    group = max(1, block // 128)
    groups = series[: series.size // group * group].reshape(-1, group)
    return time_scales(groups.mean(axis=1), groups.var(axis=1), group=group, block=block // group)


def two_scales(share: float, length: int, rng: np.random.Generator, series: int) -> NDArray[np.float64]:
    fast = correlated_normals(length, FAST, rng, series=series)
    return np.sqrt(1 - share) * fast + np.sqrt(share) * correlated_normals(length, SLOW, rng, series=series)


@pytest.mark.parametrize("coefficient", [0.9, 0.99])
def test_blocks_tell_the_inefficiency_of_an_autoregression(coefficient: float) -> None:
    """Single estimates scatter by 0.3; the mean of 100 by 0.03, bound of four times that and 0.03 for the window."""
    expected = ONE_SCALE[coefficient]
    found = [
        scales_of(series).blocks.value
        for series in correlated_normals(
            int(300 * expected), coefficient, np.random.default_rng(21), series=100
        )
    ]

    assert abs(np.mean(found) / expected - 1) < 0.15
    assert 0.15 < np.std(found) / expected < 0.45


@pytest.mark.parametrize("coefficient", ONE_SCALE)
@pytest.mark.parametrize("independent", [100, 300, 1000])
def test_one_time_scale_is_hardly_ever_taken_for_two(coefficient: float, independent: int) -> None:
    """At most 2 % of series.

    200 series a case: more than the 99.9 % point of a binomial distribution would show a rate above 2 %.
    """
    length = int(independent * ONE_SCALE[coefficient])
    alarms = sum(
        differ([scales_of(series)], 1.5, comparisons=1, false_alarms=0.01)
        for series in correlated_normals(length, coefficient, np.random.default_rng(22), series=200)
    )

    assert alarms <= binom.ppf(0.999, 200, 0.02)


@pytest.mark.parametrize(("share", "independent"), [(0.2, 100), (0.05, 300), (0.05, 1000)])
def test_eight_runs_together_show_two_time_scales(share: float, independent: int) -> None:
    """Found in 95, 78 and 97 % of 37 simulated studies; 6 of 10 at least."""
    length = int(independent * ((1 - share) * G_FAST + share * G_SLOW))
    found = [scales_of(series) for series in two_scales(share, length, np.random.default_rng(23), 80)]

    studies = [found[place : place + 8] for place in range(0, 80, 8)]

    assert sum(differ(study, 1.5, comparisons=1, false_alarms=0.01) for study in studies) >= 6


def test_the_slower_estimate_is_right_where_the_series_is_twice_too_low() -> None:
    share, series = 0.05, 60
    expected = (1 - share) * G_FAST + share * G_SLOW
    found = [
        scales_of(each) for each in two_scales(share, int(1000 * expected), np.random.default_rng(24), series)
    ]

    assert np.mean([each.slower.value for each in found]) == pytest.approx(expected, rel=0.15)
    assert np.mean([each.series.value for each in found]) < 0.65 * expected  # else nothing is gained


def estimate(value: float) -> Inefficiency:
    return Inefficiency(value=value, standard_error=0.1 * value, window=3)


@pytest.mark.parametrize(("blocks", "alarm"), [(10.0, False), (14.0, False), (40.0, True), (5.0, False)])
def test_only_more_correlation_in_blocks_counts(blocks: float, alarm: bool) -> None:
    found = TimeScales(series=estimate(10.0), blocks=estimate(blocks), block_count=100)

    assert differ([found], 1.5, comparisons=1, false_alarms=0.01) is alarm
    # Two standard errors of a hundred blocks are a factor of 1.76.
    assert found.slower.value == (blocks if blocks > 17.6 else 10.0)


def test_a_ratio_that_chance_explains_is_no_alarm() -> None:
    """1.7 is 1.9 standard errors of 100 blocks; of a hundred runs together it is 19."""
    found = TimeScales(series=estimate(10.0), blocks=estimate(17.0), block_count=100)

    assert not differ([found], 1.5, comparisons=1, false_alarms=0.01)
    assert differ([found] * 100, 1.5, comparisons=1, false_alarms=0.01)


@pytest.mark.parametrize("length", [4, 40, 127])
def test_runs_too_short_for_blocks_have_one_estimate(length: int) -> None:
    found = scales_of(np.random.default_rng(25).standard_normal(length))

    assert found.blocks is found.series


def test_a_constant_series_has_one_estimate() -> None:
    found = scales_of(np.full(5000, 3.25))

    assert found.slower.constant
    assert found.slower.value == 5000
