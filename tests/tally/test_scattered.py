"""Leaves kept without gaps, for runs that visit many more panels than a leaf has rows, against leaves with gaps."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.tally.leaves import LeafSums, ScatteredSums, leaf_sums, scattered_sums, without_empty_keys
from reweight.tally.nodes import COUNT, Column, Nodes
from reweight.tally.run_tally import RunTally

COLUMNS = (COUNT, Column("a", 1), Column("a", 2))


@pytest.mark.parametrize("length", [1, 64, 512])
def test_the_same_sums_stand_in_both_forms(length: int) -> None:
    rng = np.random.default_rng(5)
    rows = np.column_stack([rng.normal(0, 300.0, 5000), rng.normal(size=5000)])
    nodes = Nodes(0.5)

    full = without_empty_keys(leaf_sums(rows, length, nodes, COLUMNS, ["a"]))
    scattered = scattered_sums(rows, length, nodes, COLUMNS, ["a"])

    np.testing.assert_array_equal(scattered.keys, full.keys)
    np.testing.assert_array_equal(scattered.rows, full.rows)
    placed = np.zeros_like(full.sums)
    placed.swapaxes(2, 3)[:, scattered.leaf, scattered.place] = scattered.sums
    np.testing.assert_array_equal(placed, full.sums)  # both are summed in row order
    assert scattered.leaf.size <= 5000


def wide_and_narrow() -> dict[str, np.ndarray]:
    """A ladder of runs whose widths differ by a factor of 400: Gamma energies over a wide range of temperatures."""
    rng = np.random.default_rng(12)
    return {f"{t:g}": rng.gamma(15.0, t, 6000) for t in np.geomspace(1.0, 400.0, 17)}


def test_a_wide_run_is_scattered_and_a_narrow_one_is_not() -> None:
    rng = np.random.default_rng(2)
    for width, form in ((1.0, LeafSums), (2000.0, ScatteredSums)):
        tally = RunTally(Nodes(0.125), (COUNT,), ())
        tally.add(rng.normal(0, width, (20_000, 1)))
        leaves, _ = tally.complete()
        assert isinstance(leaves, form)
        assert leaves.sums.size <= 32 * 20_000


def test_answers_from_scattered_leaves_are_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    runs = wide_and_narrow()
    temperatures = [float(name) for name in runs]
    asked = [1.3, 20.0, 250.0]

    scattered_runs = rw.combine(runs, temperatures=temperatures, discard=0)
    assert isinstance(scattered_runs.runs[-1].tally.complete()[0], ScatteredSums)
    scattered = rw.curve(scattered_runs, asked)
    monkeypatch.setattr("reweight.tally.run_tally.FEW_NUMBERS", 10**12)
    full_runs = rw.combine(runs, temperatures=temperatures, discard=0)
    full = rw.curve(full_runs, asked)

    assert isinstance(full_runs.runs[-1].tally.complete()[0], LeafSums)
    for name in (
        "mean_energy",
        "heat_capacity",
        "mean_energy_standard_error",
        "heat_capacity_standard_error",
    ):
        np.testing.assert_allclose(scattered[name], full[name], rtol=1e-9)
    assert np.all(np.abs(scattered.heat_capacity - 15.0) < 4 * scattered.heat_capacity_standard_error)
