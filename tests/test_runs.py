"""Runs held in memory: every accepted form gives the same answers, and what cannot be used is refused by name."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import reweight as rw
from reweight.errors import TooShortError

TEMPERATURES = [1.0, 1.3]


def energies(count: int = 500) -> np.ndarray:
    """Two runs of equal length, shape (2, count)."""
    rng = np.random.default_rng(1)
    return np.stack([rng.gamma(20.0, t, count) for t in TEMPERATURES])


def as_mapping_of_arrays() -> tuple[Any, dict[str, Any]]:
    return dict(zip(("a", "b"), energies(), strict=True)), {"temperatures": TEMPERATURES}


def as_mapping_of_lists() -> tuple[Any, dict[str, Any]]:
    return {name: list(map(float, run)) for name, run in zip("ab", energies(), strict=True)}, {
        "temperatures": tuple(TEMPERATURES)
    }


def as_mapping_of_columns() -> tuple[Any, dict[str, Any]]:
    return {name: {"energy": run} for name, run in zip("ab", energies(), strict=True)}, {
        "temperatures": np.array(TEMPERATURES)
    }


def as_labelled_array() -> tuple[Any, dict[str, Any]]:
    return xr.DataArray(energies(), dims=("temperature", "sample"), coords={"temperature": TEMPERATURES}), {}


def as_labelled_array_the_other_way_round() -> tuple[Any, dict[str, Any]]:
    return as_labelled_array()[0].transpose("sample", "temperature"), {}


def as_labelled_array_without_coordinate() -> tuple[Any, dict[str, Any]]:
    return xr.DataArray(energies(), dims=("temperature", "sample")), {"temperatures": TEMPERATURES}


def as_tree() -> tuple[Any, dict[str, Any]]:
    children = {
        name: xr.DataTree(xr.Dataset({"energy": ("sample", run)}, coords={"temperature": t}))
        for name, run, t in zip("ab", energies(), TEMPERATURES, strict=True)
    }
    return xr.DataTree(children=children), {}


def as_tree_with_inverse_temperatures() -> tuple[Any, dict[str, Any]]:
    children = {
        name: xr.DataTree(xr.Dataset({"energy": ("sample", run)}, coords={"inverse_temperature": 1 / t}))
        for name, run, t in zip("ab", energies(), TEMPERATURES, strict=True)
    }
    return xr.DataTree(children=children), {}


FORMS = [
    as_mapping_of_arrays,
    as_mapping_of_lists,
    as_mapping_of_columns,
    as_labelled_array,
    as_labelled_array_the_other_way_round,
    as_labelled_array_without_coordinate,
    as_tree,
    as_tree_with_inverse_temperatures,
]


@pytest.mark.parametrize("form", FORMS)
def test_every_form_of_the_same_runs_gives_the_same_answers(form: Any) -> None:
    plain, keys = as_mapping_of_arrays()
    expected = rw.curve(rw.combine(plain, **keys), [1.1, 1.2]).drop_vars("run")

    runs, keys = form()
    combined = rw.combine(runs, **keys)

    xr.testing.assert_identical(rw.curve(combined, [1.1, 1.2]).drop_vars("run"), expected)
    np.testing.assert_allclose(combined.temperatures, TEMPERATURES, rtol=1e-15)
    assert combined.description.energy_unit == "reduced"


def test_whole_numbers_and_single_precision_are_accepted() -> None:
    rng = np.random.default_rng(2)
    counts = rng.poisson(20, 300)
    for kind in (np.int64, np.int16, np.float32):
        combined = rw.combine({"a": counts.astype(kind)}, temperatures=[1.0], discard=0)
        assert float(rw.curve(combined, [1.0], of="energy").mean_energy[0]) == pytest.approx(
            counts.mean(), rel=1e-12
        )


def test_the_runs_given_are_not_changed() -> None:
    runs, keys = as_mapping_of_arrays()
    before = {name: run.copy() for name, run in runs.items()}
    rw.combine(runs, **keys)

    for name, run in runs.items():
        np.testing.assert_array_equal(run, before[name])


def test_a_tree_brings_its_units_count_and_title() -> None:
    tree, _ = as_tree()
    tree.attrs = {
        "title": "From a tree",
        "energy_unit": "kJ/mol",
        "temperature_unit": "K",
        "count": 5,
        "per": "bead",
    }
    for child in tree.children.values():
        child.ds = child.to_dataset().assign_coords(temperature=300 * float(child.coords["temperature"]))

    description = rw.combine(tree).description

    assert (description.title, description.energy_unit, description.temperature_unit) == (
        "From a tree",
        "kJ/mol",
        "K",
    )
    assert (description.count, description.per) == (5, "bead")


def test_further_columns_are_observables() -> None:
    rng = np.random.default_rng(3)
    runs = {
        name: {"energy": run, "order": rng.standard_normal(run.size), "volume": run**2}
        for name, run in zip("ab", energies(), strict=True)
    }

    plain = rw.combine(runs, temperatures=TEMPERATURES).description.observables
    chosen = rw.combine(
        runs,
        temperatures=TEMPERATURES,
        observables={"order": {"unit": "1", "moments": [1, 2], "absolute": True}},
    ).description.observables

    assert [each.name for each in plain] == ["order", "volume"]
    assert [(each.name, each.moments, each.absolute) for each in chosen] == [("order", (1, 2), True)]


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_energies_that_are_not_finite_are_refused_with_run_and_row(bad: float) -> None:
    runs, keys = as_mapping_of_arrays()
    runs["b"][[41, 77]] = bad

    with pytest.raises(
        rw.InputError, match=rf"energy must be finite; got {bad} \(run 'b', row 42; 2 of 500 rows\)"
    ):
        rw.combine(runs, **keys)


def test_numbers_of_a_tree_that_are_not_finite_are_refused_with_run_and_row() -> None:
    tree, _ = as_tree()
    tree["b"]["energy"][7] = np.nan

    with pytest.raises(
        rw.InputError, match=r"energy must be finite; got nan \(run 'b', row 8; 1 of 500 rows\)"
    ):
        rw.combine(tree)


def test_observables_that_are_not_finite_are_refused_too() -> None:
    runs = {"a": {"energy": energies()[0], "order": np.full(500, np.nan)}}

    with pytest.raises(
        rw.InputError, match=r"order must be finite; got nan \(run 'a', row 1; 500 of 500 rows\)"
    ):
        rw.combine(runs, temperatures=[1.0])


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        (np.ones((10, 2)), r"shape \(samples,\) of the energy; got \(10, 2\) for 'energy' \(run 'a'\)"),
        ({"energy": np.ones(20), "order": np.ones(19)}, r"got \(19,\) for 'order' \(run 'a'\)"),
        ({"enrgy": np.ones(20)}, r"must have a column energy; got enrgy \(run 'a'\)"),
        (3.0, r"got \(\) for 'energy' \(run 'a'\)"),
    ],
)
def test_columns_of_a_wrong_shape_are_refused(columns: Any, message: str) -> None:
    with pytest.raises(rw.InputError, match=message):
        rw.combine({"a": columns}, temperatures=[1.0])


@pytest.mark.parametrize(
    ("temperatures", "message"),
    [
        (None, r"one temperature a run; got 0 for 2 runs\. Pass temperatures=\[\.\.\.\]"),
        ([1.0], "got 1 for 2 runs"),
        ([1.0, 1.1, 1.2], "got 3 for 2 runs"),
        ([1.0, 0.0], r"greater than absolute zero; got 0 \(1 of 1 values\)"),
        ([-1.0, 1.0], "greater than absolute zero; got -1"),
        ([1.0, np.nan], "greater than absolute zero; got nan"),
    ],
)
def test_temperatures_that_do_not_fit_are_refused(temperatures: Any, message: str) -> None:
    runs, _ = as_mapping_of_arrays()
    with pytest.raises(rw.InputError, match=message):
        rw.combine(runs, temperatures=temperatures)


def test_a_labelled_array_of_other_dimensions_is_refused() -> None:
    with pytest.raises(rw.InputError, match="dimensions temperature and sample; got T, n"):
        rw.combine(xr.DataArray(energies(), dims=("T", "n")))
    with pytest.raises(rw.InputError, match="must have a coordinate temperature"):
        rw.combine(xr.DataArray(energies(), dims=("temperature", "sample")))


def test_a_tree_without_runs_temperatures_or_energies_is_refused() -> None:
    with pytest.raises(rw.InputError, match="one child a run; got none"):
        rw.combine(xr.DataTree())
    bare = xr.DataTree(children={"a": xr.DataTree(xr.Dataset({"energy": ("sample", energies()[0])}))})
    with pytest.raises(rw.InputError, match="scalar coordinate temperature; run 'a' has none"):
        rw.combine(bare)
    odd = xr.DataTree(
        children={"a": xr.DataTree(xr.Dataset({"e": ("sample", energies()[0])}, coords={"temperature": 1.0}))}
    )
    with pytest.raises(rw.InputError, match=r"must have a column energy; got e \(run 'a'\)"):
        rw.combine(odd)


def test_runs_with_different_observables_are_refused() -> None:
    first, second = energies()
    with pytest.raises(rw.InputError, match="same observables; run 'b' lacks 'order'"):
        rw.combine(
            {"a": {"energy": first, "order": first}, "b": {"energy": second}}, temperatures=TEMPERATURES
        )


@pytest.mark.parametrize("name", ["", "a/b", 3])
def test_names_that_cannot_be_written_to_a_file_are_refused(name: Any) -> None:
    with pytest.raises(rw.InputError, match="run names must be non-empty texts without '/'"):
        rw.combine({name: energies()[0]}, temperatures=[1.0])


@pytest.mark.parametrize("count", [0, 1, 9])
def test_runs_too_short_for_an_error_are_refused(count: int) -> None:
    first, second = energies()
    with pytest.raises(TooShortError, match=rf"at least 10 samples; got {count} \(run 'short'\)") as refusal:
        rw.combine({"long": first, "short": second[:count]}, temperatures=TEMPERATURES)

    assert refusal.value.run == "short"


def test_the_shortest_runs_allowed_are_answered() -> None:
    combined = rw.combine({"a": energies()[0][:10]}, temperatures=[1.0])

    answer = rw.curve(combined, [1.0], beyond_reach=True)
    assert np.isfinite(answer.heat_capacity_standard_error).all()


@pytest.mark.parametrize(
    ("count", "discard"), [(100, 95), (100, "96 %"), (1036, 1024), (20, 20), (20, 10**9)]
)
def test_a_start_so_long_that_no_error_could_be_told_is_refused(count: int, discard: int | str) -> None:
    with pytest.raises(TooShortError, match=r"discard must leave at least 10 rows .*\(run 'a'\)"):
        rw.combine({"a": np.resize(energies()[0], count)}, temperatures=[1.0], discard=discard)


def test_the_start_left_out_is_rounded_up_to_whole_blocks() -> None:
    combined = rw.combine({"a": energies()[0]}, temperatures=[1.0], discard="10 %")

    (run,) = combined.runs
    assert run.decision.transient == 50
    assert 50 <= run.transient_rows < 50 + int(run.leaf_rows[0])
    assert run.samples == 500 - run.transient_rows


def test_runs_that_are_no_runs_are_a_wrong_type() -> None:
    with pytest.raises(TypeError, match=r"runs must be a study file, a DataTree.*got list"):
        rw.combine([1.0, 2.0], temperatures=[1.0])


def test_no_runs_at_all_are_refused() -> None:
    with pytest.raises(rw.InputError, match="at least one run"):
        rw.combine({}, temperatures=[])


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ({"weighting": "equal"}, "weighting must be one of independent, samples; got 'equal'"),
        (
            {"observables": {"order": {"units": "1"}}},
            "must be described by unit, is, moments, absolute, above; got 'units'",
        ),
        ({"observables": {"order": {}}}, "run 'a' lacks 'order'"),
        ({"energy_unit": "kJ/mole of sheep"}, "sheep"),
        ({"energy_unit": "K", "temperature_unit": "reduced"}, "both or neither"),
    ],
)
def test_other_arguments_that_make_no_sense_are_refused(keys: dict[str, Any], message: str) -> None:
    runs, given = as_mapping_of_arrays()
    with pytest.raises(rw.InputError, match=message):
        rw.combine(runs, **given, **keys)


def test_a_study_file_is_not_told_again_what_it_says_itself() -> None:
    with pytest.raises(rw.InputError, match=r"a study file says .* itself"):
        rw.combine("study.toml", temperatures=[1.0])


@pytest.mark.parametrize("discard", ["abc", "nan %", 2.5, -5, "-10 %", True, "10"])
def test_a_discard_that_means_nothing_is_refused(discard):
    runs = {"cold": np.arange(100.0), "hot": np.arange(100.0)}
    with pytest.raises(rw.InputError, match="discard must be"):
        rw.combine(runs, temperatures=[1.0, 1.1], discard=discard)
