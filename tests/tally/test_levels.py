"""Discrete energies: counted one by one, their spacing found behind rounding, poured into panels without loss."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from naive import level_tally

from reweight.tally.leaves import leaf_sums, without_empty_keys
from reweight.tally.levels import MOST_LEVELS, SIGHTINGS, are_levels, find_spacing, pour
from reweight.tally.nodes import COUNT, Column, Nodes
from reweight.tally.panels import node_energies, node_matrix

LATTICE = -2048 + 4 * np.arange(0, 300)  # energies of a 32 x 32 lattice


def drawn(rng: np.random.Generator, count: int = 4096) -> np.ndarray:
    """Energies of the lattice, neighbouring levels mostly, with the gaps that a real one has at the ground state."""
    levels = np.delete(LATTICE, 1)
    return levels[np.clip(rng.normal(120, 40, count).astype(int), 0, levels.size - 1)].astype(float)


@given(st.lists(st.integers(-20, 20), min_size=1, max_size=300), st.integers(0, 6))
def test_levels_are_counted_exactly(energies: list[int], doublings: int) -> None:
    values = np.array(energies, float)
    length = 2**doublings
    observable = np.arange(values.size, dtype=float)
    leaves = leaf_sums(
        np.stack([values, observable], axis=1),
        length,
        Nodes(1.0, discrete=True),
        (COUNT, Column("a", 2)),
        ["a"],
    )

    for column, weights in enumerate((None, observable**2)):
        expected = level_tally(values, length, weights)
        assert list(leaves.keys) == sorted(expected)
        for place, level in enumerate(leaves.keys):
            np.testing.assert_array_equal(leaves.sums[column, :, 0, place], expected[level])
    assert leaves.rows.sum() == values.size


@pytest.mark.parametrize("degree", range(8))
def test_pouring_levels_into_panels_conserves_moments(degree: int) -> None:
    rng = np.random.default_rng(degree)
    levels = np.unique(rng.uniform(-50, 50, 200))
    counts = rng.integers(0, 30, (2, 5, 1, levels.size)).astype(float)
    width = 4.0

    keys, sums = pour(levels, counts, width)
    at_nodes = node_energies(keys, width, 0) / 50
    weights = (np.swapaxes(sums, 2, 3) @ node_matrix()).reshape(2, 5, -1)

    expected = counts[:, :, 0] @ (levels / 50) ** degree
    np.testing.assert_allclose(weights @ at_nodes**degree, expected, atol=1e-11 * counts.sum())


def test_poured_levels_are_what_panels_would_have_kept() -> None:
    energies = drawn(np.random.default_rng(5))
    as_levels = leaf_sums(energies[:, None], 64, Nodes(16.0, discrete=True), (COUNT,), [])
    as_panels = without_empty_keys(leaf_sums(energies[:, None], 64, Nodes(16.0), (COUNT,), []))

    keys, sums = pour(as_levels.keys.astype(float), as_levels.sums, 16.0)

    np.testing.assert_array_equal(keys, as_panels.keys)
    np.testing.assert_allclose(sums, as_panels.sums, atol=1e-12)


def test_levels_must_be_few_and_each_seen_several_times() -> None:
    assert are_levels(1, SIGHTINGS)
    assert not are_levels(1, SIGHTINGS - 1)
    assert are_levels(MOST_LEVELS, 10**9)
    assert not are_levels(MOST_LEVELS + 1, 10**9)


@pytest.mark.parametrize("digits", [4, 6, 9])
@pytest.mark.parametrize("sites", [1024, 96])
def test_energies_per_site_with_few_digits_stay_one_value_a_level(digits: int, sites: int) -> None:
    """A file holds E / N rounded.  Times N, a level is shifted by up to N / 2 in the last digit, but always alike."""
    exact = drawn(np.random.default_rng(digits))
    read = np.round(exact / sites, digits) * sites

    assert find_spacing(read) is None
    assert are_levels(np.unique(read).size, read.size)


@pytest.mark.parametrize("digits", [5, 6, 7])
@pytest.mark.parametrize("sites", [1024, 1000, 96])
def test_the_spacing_behind_rounded_energies_per_site_is_found(digits: int, sites: int) -> None:
    """Energies per site updated step by step and printed: a level comes out as one of two neighbouring numbers."""
    rng = np.random.default_rng(digits)
    exact = drawn(rng)
    last_digit = 10.0**-digits
    read = np.round(exact / sites + rng.uniform(-0.6, 0.6, exact.size) * last_digit, digits) * sites
    assert np.unique(read).size > 1.5 * np.unique(exact).size  # blurred indeed

    spacing = find_spacing(read)

    assert spacing is not None
    assert spacing.step == 4
    np.testing.assert_array_equal(spacing.snap(read), exact)
    assert 0 < spacing.largest_shift <= 1.11 * last_digit * sites


def test_blurred_levels_are_found_again() -> None:
    """Several values a rounding error apart for each level, as a file of several programs may hold."""
    rng = np.random.default_rng(9)
    exact = drawn(rng)
    blurred = exact * (1 + rng.integers(-2, 3, exact.size) * 2.0**-40)

    spacing = find_spacing(blurred)

    assert spacing is not None
    np.testing.assert_array_equal(spacing.snap(blurred), exact)


def test_continuous_energies_are_left_alone() -> None:
    rng = np.random.default_rng(2)
    for energies in (rng.gamma(30.0, 1.0, 4096), rng.normal(0, 1, 4096), rng.uniform(0, 1, 100)):
        assert find_spacing(energies) is None


def test_exact_levels_are_left_alone() -> None:
    assert find_spacing(drawn(np.random.default_rng(3))) is None


def test_continuous_energies_printed_with_few_digits_are_left_alone() -> None:
    energies = np.round(np.random.default_rng(4).gamma(30.0, 1.0, 4096), 2)

    spacing = find_spacing(energies)

    assert spacing is None or np.array_equal(spacing.snap(energies), energies)


def test_levels_off_any_grid_are_left_alone() -> None:
    """Blurred, but irrational: snapping them would change the physics."""
    rng = np.random.default_rng(6)
    levels = np.sqrt(np.arange(1, 40))
    blurred = rng.choice(levels, 4096) + rng.uniform(-1e-9, 1e-9, 4096)

    assert find_spacing(blurred) is None


def test_snapping_leaves_energies_alone_that_are_plainly_off_the_grid() -> None:
    exact = drawn(np.random.default_rng(8))
    spacing = find_spacing(exact + np.random.default_rng(8).uniform(-1e-7, 1e-7, exact.size))

    assert spacing is not None
    np.testing.assert_array_equal(spacing.snap(np.array([-1025.3, -1024.0001])), [-1025.3, -1024.0])
