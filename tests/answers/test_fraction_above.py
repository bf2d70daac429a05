"""The fraction of samples above a value: against plain sums over samples and an enumeration, and on its way to a file."""

from __future__ import annotations

import json
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr
from naive import sample_by_sample

import reweight as rw
from reweight.datasets.exact import canonical_mean
from reweight.datasets.exact_models import lattice_joint_levels
from reweight.datasets.sampling import draw_joint
from reweight.errors import NotInFileError


def runs_of(energies: dict[float, np.ndarray], rng: np.random.Generator) -> dict[str, dict[str, np.ndarray]]:
    """An observable that follows the energy, with noise, of either sign."""
    return {
        f"T={temperature}": {
            "energy": energy,
            "order": energy / energy.mean() - 1 + 0.2 * rng.standard_normal(energy.size),
        }
        for temperature, energy in energies.items()
    }


@pytest.mark.parametrize("rows", [1500, 70_000])  # rows kept as they are, and leaves
@pytest.mark.parametrize("kind", ["panels", "levels"])
def test_it_is_the_weighted_share_of_the_samples_above(rows, kind) -> None:
    rng = np.random.default_rng(31)
    energies = {
        t: rng.gamma(12.0, t, rows) if kind == "panels" else rng.poisson(9 * t, rows).astype(float)
        for t in (1.0, 1.25)
    }
    runs = runs_of(energies, rng)
    observables = {"order": {"above": 0.1, "absolute": True}}

    combined = rw.combine(
        runs, temperatures=list(energies), weighting="samples", discard=0, observables=observables
    )
    found = rw.curve(combined, [1.05, 1.2], of="order.above").order_above

    direct = sample_by_sample(list(energies.values()), 1 / np.array(list(energies)))
    indicator = np.concatenate([run["order"] for run in runs.values()]) > 0.1
    expected = [direct.mean(indicator.astype(float), 1 / t) for t in (1.05, 1.2)]
    np.testing.assert_allclose(found, expected, rtol=1e-9)
    assert 0.1 < expected[0] < 0.9  # else nothing is counted


def test_it_is_the_same_for_a_run_whose_leaves_have_gaps() -> None:
    """A run a thousand times wider than the other is tallied without the gaps between the panels it visits."""
    rng = np.random.default_rng(32)
    runs = {
        "narrow": {"energy": rng.normal(0.0, 1.0, 3000), "order": rng.standard_normal(3000)},
        "wide": {"energy": rng.normal(0.0, 1000.0, 3000), "order": rng.standard_normal(3000)},
    }

    combined = rw.combine(
        runs,
        temperatures=[1.0, np.inf],
        weighting="samples",
        discard=0,
        observables={"order": {"above": 0.5}},
    )
    found = rw.curve(combined, np.inf, of="order.above", beyond_reach=True).order_above

    direct = sample_by_sample([run["energy"] for run in runs.values()], np.array([1.0, 0.0]))
    indicator = np.concatenate([run["order"] for run in runs.values()]) > 0.5
    assert float(found[0]) == pytest.approx(direct.mean(indicator.astype(float), 0.0), rel=1e-9)


def test_a_sample_that_equals_the_value_is_not_above_it() -> None:
    rng = np.random.default_rng(33)
    order = np.tile([1.0, 2.0, 3.0, 4.0], 500)
    combined = rw.combine(
        {"a": {"energy": rng.gamma(30.0, 1.0, 2000), "order": order}},
        temperatures=[1.0],
        discard=0,
        observables={"order": {"above": 2}},
    )

    assert float(rw.curve(combined, 1.0, of="order.above").order_above[0]) == pytest.approx(0.5)


def test_it_agrees_with_the_enumeration_of_the_lattice_within_its_error() -> None:
    """4 x 4 lattice, by enumeration of its 65,536 states; four standard errors are passed once in 10,000."""
    joint = lattice_joint_levels()
    rng = np.random.default_rng(20240816)
    temperatures = [2.0, 2.5, 3.2]
    runs = {}
    for temperature in temperatures:
        energy, magnetization = draw_joint(joint, temperature, 20_000, rng, coefficient=0.5)
        runs[f"{temperature}"] = {"energy": energy, "absm": magnetization / 16}
    asked = np.array([2.2, 2.8])
    exact = canonical_mean(joint.energies, joint.log_degeneracies, joint.observable / 16 > 0.6, asked)

    answer = rw.curve(
        rw.combine(runs, temperatures=temperatures, observables={"absm": {"above": 0.6}}),
        asked,
        of="absm.above",
    )

    error = answer.absm_above_standard_error.to_numpy()
    assert np.all(np.abs(answer.absm_above.to_numpy() - exact) < 4 * error)
    assert np.all((error > 0) & (error < 0.02))


@pytest.fixture(scope="module")
def described() -> rw.DensityOfStates:
    rng = np.random.default_rng(34)
    runs = runs_of({t: rng.gamma(30.0, 0.0083 * t, 2000) for t in (300.0, 330.0)}, rng)
    runs = {name: {**columns, "size": columns["energy"]} for name, columns in runs.items()}
    return rw.combine(
        runs,
        temperatures=[300.0, 330.0],
        energy_unit="kJ/mol",
        count=10,
        observables={"order": {"above": 0.05, "unit": "nm", "is": "total"}, "size": {}},
    )


def test_it_can_be_asked_of_observables_that_declare_a_value_and_of_no_others(described) -> None:
    assert "order.above" in described.quantity_names
    assert "size.above" not in described.quantity_names
    with pytest.raises(NotInFileError, match=r"got 'size\.above'"):
        rw.curve(described, 310.0, of="size.above")


def test_it_is_a_pure_number_that_stays_in_answers_per_count(described) -> None:
    total, per = (rw.curve(described, 310.0, of="order.above", per_count=each) for each in (False, True))

    assert total.order_above.attrs["units"] == "1"
    assert total.order_above.attrs["long_name"] == "fraction of samples with order above 0.05"
    xr.testing.assert_identical(total, per)


def test_it_comes_back_from_a_file_with_the_same_bits(described, tmp_path: Path) -> None:
    rw.save(described, tmp_path / "study.nc")

    opened = rw.open_combined(tmp_path / "study.nc")

    assert opened.description == described.description
    assert opened.description.observables[0].above == 0.05
    asked = {"temperature": [305.0, 325.0], "of": ["order.above", "energy"]}
    xr.testing.assert_identical(rw.curve(described, **asked), rw.curve(opened, **asked))


def test_a_file_written_before_there_were_such_fractions_is_still_opened(tmp_path: Path) -> None:
    rng = np.random.default_rng(35)
    runs = runs_of({t: rng.gamma(30.0, t, 500) for t in (1.0, 1.1)}, rng)
    rw.save(rw.combine(runs, temperatures=[1.0, 1.1]), tmp_path / "study.nc")
    with netCDF4.Dataset(tmp_path / "study.nc", "a") as file:
        description = json.loads(file.description)
        del description["observables"][0]["above"]
        file.description = json.dumps(description)

    assert rw.open_combined(tmp_path / "study.nc").description.observables[0].above is None


@pytest.mark.parametrize("above", ["high", np.nan, np.inf, True, [0.5]])
def test_a_value_must_be_a_finite_number(above) -> None:
    runs = {"a": {"energy": np.arange(50.0), "order": np.arange(50.0)}}

    with pytest.raises(rw.InputError, match=r"above must be a finite number \(observable 'order'\); got"):
        rw.combine(runs, temperatures=[1.0], observables={"order": {"above": above}})
