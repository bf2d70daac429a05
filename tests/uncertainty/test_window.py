"""Variances from block sums against plain loops, and their behaviour where the answer is known."""

from __future__ import annotations

import numpy as np
import pytest
from naive import block_variance
from scipy.stats import t as student

from reweight.datasets.sampling import correlated_normals
from reweight.errors import InputError
from reweight.uncertainty.influence import centred
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.window import correlation, variance


def block_series(blocks: int, coefficient: float, answers: int, seed: int) -> np.ndarray:
    series = correlated_normals(blocks, coefficient, np.random.default_rng(seed), series=answers).T
    return series - series.mean(axis=0)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("coefficient", [-0.6, 0.0, 0.5, 0.95])
def test_the_variance_agrees_with_one_computed_by_loops(coefficient: float, seed: int) -> None:
    runs = [block_series(blocks, coefficient, 5, 10 * seed + blocks) for blocks in (64, 100, 127)]

    found = variance(runs)

    for answer in range(5):
        parts = [block_variance(run[:, answer]) for run in runs]
        np.testing.assert_allclose(found.by_run[:, answer], parts, rtol=1e-10)
        assert found.total[answer] == pytest.approx(sum(parts), rel=1e-10)
    np.testing.assert_allclose(found.shares.sum(axis=0), 1, rtol=1e-12)
    np.testing.assert_allclose(found.standard_error**2, found.total, rtol=1e-12)


def test_every_answer_has_its_own_window() -> None:
    slow, fast = block_series(127, 0.9, 1, 1), block_series(127, 0.0, 1, 2)
    together = variance([np.concatenate([slow, fast], axis=1)])

    assert together.windows[0, 0] > together.windows[0, 1]
    np.testing.assert_allclose(together.by_run[0, 0], variance([slow]).by_run[0, 0])
    np.testing.assert_allclose(together.by_run[0, 1], variance([fast]).by_run[0, 0])


def test_the_variance_is_that_of_repeated_sums_of_correlated_blocks() -> None:
    """The sum of B blocks of an autoregression has variance B g, less what ends there (reference: closed form)."""
    count, coefficient, repeats = 100, 0.5, 400
    sums = correlated_normals(count, coefficient, np.random.default_rng(3), series=repeats)
    found = np.array([variance([centred(run[:, None], np.ones(count))]).total[0] for run in sums])

    exact = count * 3 - 2 * coefficient * (1 - coefficient**count) / (1 - coefficient) ** 2
    # 400 repetitions of an estimate that scatters by 30 % know its mean to 1.5 %.
    assert found.mean() == pytest.approx(exact, rel=0.08)
    assert np.mean(sums.sum(axis=1) ** 2) == pytest.approx(exact, rel=0.25)


def test_degrees_of_freedom_count_blocks_per_window_and_add_up_over_equal_runs() -> None:
    run = block_series(120, 0.0, 3, 4)
    one, three = variance([run]), variance([run, run, run])

    np.testing.assert_allclose(one.degrees_of_freedom, 120 / (2 * one.windows[0] + 1))
    np.testing.assert_allclose(three.degrees_of_freedom, 3 * one.degrees_of_freedom)


def test_a_run_that_does_not_matter_takes_no_degrees_of_freedom() -> None:
    run = block_series(120, 0.3, 2, 5)

    np.testing.assert_allclose(
        variance([run, np.zeros((80, 2))]).degrees_of_freedom, variance([run]).degrees_of_freedom
    )


def test_answers_that_no_sample_moves_have_no_error() -> None:
    found = variance([np.zeros((64, 2)), np.zeros((5, 2))])

    np.testing.assert_array_equal(found.standard_error, 0)
    np.testing.assert_array_equal(found.shares, 0)
    assert np.isinf(found.degrees_of_freedom).all()


@pytest.mark.parametrize("blocks", [2, 3, 5, 10])
def test_few_blocks_still_give_a_positive_variance(blocks: int) -> None:
    found = variance([block_series(blocks, 0.0, 4, blocks)])

    assert (found.total > 0).all()
    assert (found.degrees_of_freedom > 0).all()


def test_centring_takes_samples_from_a_short_last_block_only_for_its_share() -> None:
    counts = np.array([100.0, 100.0, 100.0, 7.0])
    blocks = 0.3 * counts[:, None] * np.array([[1.0, -2.0]])  # the same influence for every sample

    np.testing.assert_allclose(centred(blocks, counts), 0, atol=1e-12)
    assert np.abs(blocks - blocks.mean(axis=0)).max() > 1  # the plain mean of unequal blocks would not do


@pytest.mark.parametrize("answers", [2, 10, 200])
def test_correlations_are_positive_by_construction(answers: int) -> None:
    """Also with far more answers than blocks."""
    runs = [block_series(blocks, 0.4, answers, blocks) for blocks in (70, 110)]
    matrix = correlation(runs, variance(runs).windows)

    np.testing.assert_allclose(np.diag(matrix), 1)
    np.testing.assert_allclose(matrix, matrix.T, atol=1e-15)
    assert np.linalg.eigvalsh(matrix).min() > -1e-10
    assert np.abs(matrix).max() <= 1 + 1e-12


def test_correlations_of_known_combinations_are_found() -> None:
    a, b = (block_series(127, 0.3, 1, seed) for seed in (6, 7))
    run = np.concatenate([a, -3 * a, a + b, np.zeros_like(a)], axis=1)
    matrix = correlation([run], variance([run]).windows)

    assert matrix[0, 1] == pytest.approx(-1)
    # Overlapping sums of 8 or more of 127 blocks: some 12 independent ones, a correlation known to about 0.2.
    assert matrix[0, 2] == pytest.approx(np.sqrt(0.5), abs=0.35)
    assert matrix[0, 3] == 0


@pytest.mark.parametrize("level", [0.5, 0.95, 0.999])
def test_intervals_are_quantiles_of_student(level: float) -> None:
    error, freedom = np.array([1.0, 2.0, 0.0]), np.array([3.0, 40.0, np.inf])

    np.testing.assert_allclose(
        half_width(error, freedom, level), error * student.ppf(0.5 + level / 2, freedom), rtol=1e-8
    )


@pytest.mark.parametrize(
    ("level", "hint"), [(95, "Write 95 % as 0.95"), (0, "got 0"), (1, "got 1"), (-0.5, "got -0.5")]
)
def test_levels_outside_zero_and_one_are_refused(level: float, hint: str) -> None:
    with pytest.raises(InputError, match=hint):
        check_level(level)
