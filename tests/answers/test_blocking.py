"""Blocking curves of runs, labelled; what they show is tested in tests/series/test_blocking.py."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.sampling import correlated_normals

ROWS = 2**15


@pytest.fixture(scope="module")
def combined() -> rw.DensityOfStates:
    rng = np.random.default_rng(71)
    runs = {
        name: {
            "energy": t * (40 + 6 * correlated_normals(ROWS, 0.9, rng)),
            "radius": 3 + correlated_normals(ROWS, 0.99, rng),
        }
        for name, t in (("cold", 300.0), ("hot", 320.0))
    }
    return rw.combine(
        runs,
        temperatures=[300.0, 320.0],
        energy_unit="kJ/mol",
        observables={"radius": {"unit": "nm"}},
        discard=0,
    )


def test_the_curve_is_labelled_and_flat_where_blocks_are_long(combined: rw.DensityOfStates) -> None:
    """The exact error of the mean is 6 t sqrt(19 / N) at a coefficient of 0.9."""
    curve = rw.blocking(combined, "hot")

    assert curve.error_of_mean.attrs["units"] == "kJ mol-1"
    assert curve.block_length.to_numpy()[0] == combined.runs[1].thinned.group
    assert curve.attrs["run"] == "hot"
    exact = 6 * 320 * np.sqrt(19 / ROWS)
    flat = curve.sel(block_length=slice(256, 1024))
    assert flat.sizes["block_length"] == 3
    assert (np.abs(flat.error_of_mean - exact) < 4 * flat.error_of_mean_standard_error).all()
    assert curve.attrs["standard_error"] == pytest.approx(exact, rel=0.3)
    assert curve.attrs["statistical_inefficiency"] == pytest.approx(19, rel=0.6)


def test_observables_have_curves_of_their_own(combined: rw.DensityOfStates) -> None:
    curve = rw.blocking(combined, "cold", of="radius")

    assert curve.error_of_mean.attrs["units"] == "nm"
    assert curve.attrs["mean"] == pytest.approx(3, abs=4 * np.sqrt(199 / ROWS))
    assert float(curve.error_of_mean[-4]) == pytest.approx(np.sqrt(199 / ROWS), rel=0.6)


@pytest.mark.parametrize(
    ("run", "of", "message"),
    [
        ("warm", "energy", "run must be one of cold, hot; got 'warm'"),
        ("hot", "volume", "series must be one of energy, radius; got 'volume'"),
    ],
)
def test_unknown_runs_and_columns_are_refused(
    combined: rw.DensityOfStates, run: str, of: str, message: str
) -> None:
    with pytest.raises(rw.InputError, match=message):
        rw.blocking(combined, run, of=of)
