"""The joint covariance: consistent with single error bars, and with the scatter of repeated experiments."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.sampling import draw_gamma


def test_the_diagonal_is_the_square_of_the_standard_errors(oscillators):
    matrix = rw.covariance(oscillators, [290.0, 330.0], of=["energy", "size.mean"])
    curve = rw.curve(oscillators, [290.0, 330.0], of=["energy", "size.mean"])

    errors = [*curve["mean_energy_standard_error"].values, *curve["size_mean_standard_error"].values]
    np.testing.assert_allclose(np.sqrt(np.diag(matrix)), errors, rtol=1e-12)
    assert [str(each) for each in matrix["answer"].values] == [
        "mean_energy at 290",
        "mean_energy at 330",
        "size_mean at 290",
        "size_mean at 330",
    ]
    assert [str(each) for each in matrix["unit"].values] == ["kJ mol-1", "kJ mol-1", "nm", "nm"]
    assert matrix.sel(answer="size_mean at 290", other="mean_energy at 330").item() == pytest.approx(
        matrix.sel(answer="mean_energy at 330", other="size_mean at 290").item(), rel=1e-12
    )


def test_many_close_temperatures_give_no_negative_eigenvalue(oscillators):
    matrix = rw.covariance(oscillators, np.linspace(280, 345, 60))

    error = np.sqrt(np.diag(matrix))
    eigenvalues = np.linalg.eigvalsh(matrix / error / error[:, None])
    assert eigenvalues.min() > -1e-10 * eigenvalues.max()


def test_answers_per_count_and_in_another_unit_scale_the_covariance(oscillators):
    total = rw.covariance(oscillators, [300.0], of=["energy", "heat_capacity"])
    per = rw.covariance(
        oscillators, [300.0], of=["energy", "heat_capacity"], per_count=True, energy_unit="J/mol"
    )

    np.testing.assert_allclose(per, total * (1000 / 20) ** 2, rtol=1e-12)


def test_out_of_reach_the_covariance_is_unknown(oscillators):
    matrix = rw.covariance(oscillators, [300.0, 900.0], of="energy")

    assert np.isfinite(matrix[0, 0])
    assert np.isnan(matrix[1]).all()
    assert np.isfinite(rw.covariance(oscillators, [300.0, 900.0], of="energy", beyond_reach=True)).all()


def test_the_covariance_is_that_of_repeated_experiments():
    """300 experiments; a correlation of theirs has a standard error of (1 - r**2) / sqrt(300), four of which are allowed."""
    rng = np.random.default_rng(20240901)
    values, matrices = [], []
    for _ in range(300):
        runs = {str(t): draw_gamma(40.0, t, 2000, rng, coefficient=0.7) for t in (1.0, 1.15)}
        combined = rw.combine(runs, temperatures=[1.0, 1.15], discard=0)
        curve = rw.curve(combined, [1.02, 1.1])
        values.append([*curve["mean_energy"].values, *curve["heat_capacity"].values])
        matrices.append(rw.covariance(combined, [1.02, 1.1]).values)
    scatter, claimed = np.corrcoef(np.transpose(values)), np.mean(matrices, axis=0)
    error = np.sqrt(np.diag(claimed))
    claimed = claimed / error / error[:, None]

    allowed = 4 * (1 - scatter**2) / np.sqrt(300) + 1e-9
    assert (np.abs(scatter - claimed) < allowed).all()
    assert np.abs(scatter[0, 1]) > 0.3  # they do move together
