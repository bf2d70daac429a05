"""Leaves and the thinned series against plain group sums, for any length and any way of adding rows."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive import group_means, level_tally

import reweight as rw
from reweight.tally.leaves import leaf_length, leaf_sums
from reweight.tally.nodes import COUNT, Column, Nodes
from reweight.tally.run_tally import BATCH, RunTally

LEVELS = Nodes(1.0, discrete=True)


def tally_of(energies: np.ndarray, chunk: int = 10_000, nodes: Nodes = LEVELS) -> RunTally:
    tally = RunTally(nodes, (COUNT,), [])
    for start in range(0, energies.size, chunk):
        tally.add(energies[start : start + chunk, None])
    return tally


@given(st.integers(64, 2**40))
def test_a_run_has_64_to_127_complete_leaves_whatever_its_length(rows: int) -> None:
    length = leaf_length(rows)

    assert 64 <= rows // length <= 127
    assert length & (length - 1) == 0


@given(st.integers(1, 63))
def test_a_short_run_has_one_row_a_leaf(rows: int) -> None:
    assert leaf_length(rows) == 1


@given(st.integers(1, 300_000), st.integers(1, 150_000))
@settings(max_examples=25, deadline=None)
def test_a_tally_has_the_leaves_that_its_length_asks_for(rows: int, chunk: int) -> None:
    """Those of a run that became leaves in one pass, and those of one whose rows were kept, are the same."""
    energies = np.arange(rows) % 7.0
    leaves, thinned = tally_of(energies, chunk).complete()

    length = leaf_length(rows)
    expected = np.full(-(-rows // length), length)
    expected[-1] = rows - (expected.size - 1) * length
    np.testing.assert_array_equal(leaves.rows, expected)
    assert leaves.sums.sum() == rows
    assert thinned.group == max(1, length // 128)
    assert len(thinned.sums) == rows // thinned.group < 2**14


@pytest.mark.parametrize("rows", [100, 5000, 70_001, 200_003])
def test_leaves_hold_the_counts_of_their_own_rows(rows: int) -> None:
    energies = np.random.default_rng(rows).integers(0, 5, rows).astype(float)
    leaves, _ = tally_of(energies).complete()

    expected = level_tally(energies, leaf_length(rows))
    for place, level in enumerate(leaves.keys):
        np.testing.assert_array_equal(leaves.sums[0, :, 0, place], expected[level])


@pytest.mark.parametrize("rows", [100, 5000, 70_001, 200_003])
def test_the_thinned_series_is_the_mean_of_each_group(rows: int) -> None:
    rng = np.random.default_rng(rows)
    table = np.stack([1e6 + rng.integers(0, 50, rows), rng.standard_normal(rows)], axis=1)
    tally = RunTally(LEVELS, (COUNT, Column("m", 1)), ["m"])
    for start in range(0, rows, 9973):
        tally.add(table[start : start + 9973])
    _, thinned = tally.complete()

    for column in range(2):
        means = group_means(table[:, column], thinned.group)
        np.testing.assert_allclose(thinned.means()[:, column], means, rtol=1e-14, atol=1e-12)
        complete = table[: means.size * thinned.group, column].reshape(-1, thinned.group)
        np.testing.assert_allclose(
            thinned.within_variance()[:, column], complete.var(axis=1), rtol=1e-10, atol=1e-12
        )


def test_rows_are_kept_where_leaves_would_take_more_numbers() -> None:
    energies = np.random.default_rng(1).uniform(0, 5000, BATCH + 10)

    kept = tally_of(energies, nodes=Nodes(1.0))
    tallied = tally_of(energies, nodes=Nodes(1024.0))

    assert kept.leaves is None
    np.testing.assert_array_equal(kept.tail[:, 0], energies)
    assert tallied.leaves is not None
    assert tallied.leaves.sums.size <= BATCH
    assert tallied.tail.shape == (10, 1)


def test_leaves_of_twice_the_length_are_sums_of_two() -> None:
    rng = np.random.default_rng(2)
    rows = np.stack([rng.normal(0, 3, 2**16), rng.standard_normal(2**16)], axis=1)
    columns, names = (COUNT, Column("m", 1, absolute=True)), ["m"]
    for length in (256, 1024, 8192, 16384, 32768):
        short = leaf_sums(rows, length, Nodes(0.5), columns, names)
        long = leaf_sums(rows, 2 * length, Nodes(0.5), columns, names)
        np.testing.assert_allclose(short.sums[:, ::2] + short.sums[:, 1::2], long.sums, rtol=0, atol=1e-9)


@pytest.mark.parametrize("rows", [9000, 8192, 20_000, 16_385])
def test_the_last_leaf_may_be_short(rows: int) -> None:
    energies = np.random.default_rng(rows).integers(0, 3, rows).astype(float)
    for length in (1024, 8192, 16_384):
        leaves = leaf_sums(energies[:, None], length, LEVELS, (COUNT,), [])
        np.testing.assert_array_equal(leaves.sums[0, :, 0].sum(axis=1), leaves.rows)
        assert leaves.rows.sum() == rows


def test_energies_of_an_absurd_magnitude_are_refused_by_name() -> None:
    rng = np.random.default_rng(3)
    energies = rng.normal(0, 1, 5000)
    energies[4500] = 1e18

    with pytest.raises(rw.InputError, match=r"energies must be smaller than .*; got 1e\+18"):
        rw.combine({"a": energies}, temperatures=[1.0])


@pytest.mark.parametrize("magnitude", [1e61, 1e100, 1e200, 1e305])
def test_energies_whose_powers_would_overflow_are_refused_by_name(magnitude: float) -> None:
    energies = magnitude * np.random.default_rng(4).gamma(30.0, 1.0, 1000)

    with pytest.raises(rw.InputError, match=r"energies must be smaller than 1e\+60; got .*Check the unit"):
        rw.combine({"a": energies}, temperatures=[magnitude])


@pytest.mark.parametrize("magnitude", [1e-30, 1e55])
def test_energies_of_any_sensible_magnitude_are_answered(magnitude: float) -> None:
    energies = magnitude * np.random.default_rng(4).gamma(30.0, 1.0, 1000)
    combined = rw.combine({"a": energies}, temperatures=[magnitude], discard=0)

    answer = rw.answer(combined, magnitude)
    assert float(answer.heat_capacity) == pytest.approx((energies / magnitude).var(), rel=1e-10)
