"""Panels against the plain sum over the samples: exact for polynomials, for any energies and any weights."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive import panel_tally
from numpy.polynomial import Polynomial

from reweight.errors import InputError
from reweight.tally.leaves import leaf_sums
from reweight.tally.nodes import COUNT, Column, Nodes
from reweight.tally.panels import (
    ORDER,
    node_energies,
    node_matrix,
    nodes,
    panel_indices,
    panel_width,
    powers,
)


def node_weights(energies: np.ndarray, width: float, reference_index: int) -> tuple[np.ndarray, np.ndarray]:
    """Energies of the nodes relative to the reference, and the weights the samples give them."""
    leaves = leaf_sums(energies[:, None], 2**20, Nodes(width), (COUNT,), [])
    weights = (leaves.sums[0, 0].T @ node_matrix()).ravel()
    return node_energies(leaves.keys, width, reference_index), weights


@pytest.mark.parametrize("degree", range(ORDER))
@pytest.mark.parametrize("width", [0.25, 2.0, 32.0])
def test_node_weights_integrate_polynomials_below_the_order_exactly(degree: int, width: float) -> None:
    rng = np.random.default_rng(degree)
    energies = rng.normal(3.0, 4 * width, 500)
    at_nodes, weights = node_weights(energies, width, 0)
    polynomial = Polynomial(rng.standard_normal(degree + 1))

    scaled = polynomial(energies / width)
    # rounding: the terms cancel, so their own size is the measure
    assert weights @ polynomial(at_nodes / width) == pytest.approx(
        scaled.sum(), abs=1e-13 * np.abs(scaled).sum()
    )


def test_one_degree_more_is_not_exact() -> None:
    """Negative control: the order is what it says."""
    energies = np.random.default_rng(1).uniform(0.0, 1.0, 100)
    at_nodes, weights = node_weights(energies, 1.0, 0)

    assert abs(weights @ at_nodes**ORDER - (energies**ORDER).sum()) > 1e-6


@given(
    st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=40),
    st.integers(-6, 10),
    st.integers(0, ORDER - 1),
)
def test_every_energy_is_represented_whatever_its_place_in_its_panel(
    energies: list[float], exponent: int, degree: int
) -> None:
    width = 2.0**exponent
    values = np.array(energies)
    at_nodes, weights = node_weights(values, width, math.floor(values.min() / width))
    origin = width * math.floor(values.min() / width)
    extent = max(values.max() - origin, width)

    found = weights @ (at_nodes / extent) ** degree
    assert found == pytest.approx((((values - origin) / extent) ** degree).sum(), abs=1e-12 * values.size)


def test_sums_agree_with_one_sample_at_a_time() -> None:
    rng = np.random.default_rng(3)
    energies, values = rng.normal(0.0, 5.0, 700), rng.standard_normal(700)
    leaves = leaf_sums(np.stack([energies, values], axis=1), 64, Nodes(2.0), (COUNT, Column("a", 1)), ["a"])

    for column, weighted_with in enumerate((None, values)):
        expected = panel_tally(energies, 2.0, 64, weighted_with)
        assert list(leaves.keys) == sorted(expected)
        for place, key in enumerate(leaves.keys):
            # arccos near the ends of a panel costs the naive sum half its digits times the order
            np.testing.assert_allclose(leaves.sums[column, :, :, place], expected[int(key)], atol=1e-11)


def test_panels_far_apart_need_no_room_between_them() -> None:
    energies = np.array([-1e12, 0.5, 1e12])
    leaves = leaf_sums(energies[:, None], 4, Nodes(1.0), (COUNT,), [])

    np.testing.assert_array_equal(leaves.keys, [-(10**12), 0, 10**12])
    np.testing.assert_array_equal(leaves.sums[0, 0, 0], [1, 1, 1])


@pytest.mark.parametrize("energy", [2.0**52, -(2.0**52) - 2, 1e300])
def test_energies_too_large_for_their_fluctuation_are_refused(energy: float) -> None:
    with pytest.raises(InputError, match=r"energies must be smaller than 4\.5e\+15.*Check the unit"):
        leaf_sums(np.array([[0.0], [energy]]), 4, Nodes(1.0), (COUNT,), [])


def test_the_panel_of_an_energy_and_its_place_in_it_are_exact_at_large_offsets() -> None:
    offset = 1e9
    index, coordinate = panel_indices(offset + np.array([0.0, 0.25, 0.5]), 0.5)

    np.testing.assert_array_equal(index, [2e9, 2e9, 2e9 + 1])
    np.testing.assert_array_equal(coordinate, [-1, 0, -1])


@given(st.floats(1e-300, 1e300), st.floats(0, 1e200))
@settings(max_examples=200)
def test_widths_are_powers_of_two_just_within_their_bounds(deviation: float, gap: float) -> None:
    width = panel_width(deviation, gap)
    bound = min(deviation / 8, 0.5 / gap if gap else math.inf)

    assert math.frexp(width)[0] == 0.5
    assert width <= bound < 2 * width


def test_a_resolution_narrows_panels_and_constant_runs_get_a_width() -> None:
    assert panel_width(80.0, 0.0) == 8
    assert panel_width(80.0, 0.0, resolution=0.3) == 0.25
    assert panel_width(80.0, 1.0) == 0.5
    assert panel_width(0.0, 0.0) == 1


def test_the_node_matrix_is_the_published_form_in_chebyshev_polynomials() -> None:
    """W_q = (1/p) [S_0 + 2 sum T_j(x_q) S_j], S_j the sums of T_j: interpolation at Chebyshev nodes (no source)."""
    t = np.random.default_rng(3).uniform(-1, 1, 50)
    j = np.arange(ORDER)[:, None]
    sums = np.cos(j * np.arccos(t)).sum(axis=1)
    factor = np.where(j == 0, 1, 2) / ORDER

    expected = sums @ (factor * np.cos(j * np.arccos(nodes())))
    np.testing.assert_allclose(powers(t).sum(axis=1) @ node_matrix(), expected, atol=1e-12)


def test_nodes_are_the_zeros_of_the_next_polynomial_in_ascending_order() -> None:
    assert (np.diff(nodes()) > 0).all()
    np.testing.assert_allclose(np.cos(ORDER * np.arccos(nodes())), 0, atol=1e-14)
