"""What resampling adds to labelled answers: shape, labels, units, and intervals worked out by hand."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from scipy.stats import norm
from scipy.stats import t as student

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.answers.resamples import save_resampled
from reweight.errors import InputError, OutputError, TooShortError
from reweight.uncertainty.intervals import rescaled_interval
from reweight.uncertainty.resampling import Resamples, block_sensitivity

NAMES = ["energy", "heat_capacity", "free_energy", "size.mean", "size.slope"]
LABELS = ["mean_energy", "heat_capacity", "free_energy", "size_mean", "size_slope"]
ASKED = [290.0, 320.0]
KILOCALORIE = 4.184  # kJ, exact by definition (thermochemical)


@pytest.fixture(scope="module")
def resamples(oscillators: rw.DensityOfStates) -> Resamples:
    return rw.draw_resamples(oscillators, 400, seed=17)


@pytest.fixture(scope="module")
def with_resamples(oscillators: rw.DensityOfStates, resamples: Resamples) -> xr.Dataset:
    return rw.curve(oscillators, ASKED, of=NAMES, resamples=resamples)


@pytest.fixture(scope="module")
def without(oscillators: rw.DensityOfStates) -> xr.Dataset:
    return rw.curve(oscillators, ASKED, of=NAMES)


def test_values_and_errors_are_those_of_linear_response(
    with_resamples: xr.Dataset, without: xr.Dataset
) -> None:
    """Resampling changes intervals and adds two variables a quantity; nothing else."""
    added = {f"{label}_{kind}" for label in LABELS for kind in ("bias", "block_sensitivity")}

    assert set(with_resamples.data_vars) == set(without.data_vars) | added
    for name in without.data_vars:
        if not str(name).endswith("_interval"):
            xr.testing.assert_identical(with_resamples[name], without[name])


def test_the_dataset_says_how_its_errors_were_made(with_resamples: xr.Dataset, without: xr.Dataset) -> None:
    assert without.attrs["errors"] == "linear response"
    assert with_resamples.attrs == {
        **without.attrs,
        "errors": "block bootstrap",
        "seed": 17,
        "resamples": 400,
        "disconnected_resamples": 0,
    }
    assert with_resamples["block_length"].values.tolist() == ["half", "twice"]
    assert "block_length" not in without.coords


def test_biases_have_the_units_of_their_quantity(with_resamples: xr.Dataset) -> None:
    for label in LABELS:
        bias, value = with_resamples[f"{label}_bias"], with_resamples[label]
        assert bias.dims == ("temperature",)
        assert bias.attrs["units"] == value.attrs["units"]
        assert bias.attrs["long_name"] == f"bias of the {value.attrs['long_name']}, from resampling"
        sensitivity = with_resamples[f"{label}_block_sensitivity"]
        assert sensitivity.dims == ("block_length", "temperature")
        assert sensitivity.attrs["units"] == "1"


@pytest.mark.parametrize(("name", "label"), list(zip(NAMES, LABELS, strict=True)))
def test_bias_sensitivity_and_interval_follow_from_the_resampled_values(
    name: str,
    label: str,
    oscillators: rw.DensityOfStates,
    resamples: Resamples,
    with_resamples: xr.Dataset,
) -> None:
    drawn = rw.resampled(oscillators, resamples, ASKED, of=name)[label].to_numpy()
    (evaluation,) = evaluate(
        oscillators, oscillators.quantities([name]), oscillators.description.inverse_temperature(ASKED)
    )
    value = with_resamples[label].to_numpy()
    error = with_resamples[f"{label}_standard_error"].to_numpy()
    low, high = np.quantile(drawn, [0.025, 0.975], axis=0)
    freedom = evaluation.variance.degrees_of_freedom
    stretch = error / drawn.std(axis=0, ddof=1) * student.ppf(0.975, freedom) / norm.ppf(0.975)

    np.testing.assert_allclose(
        with_resamples[f"{label}_bias"], drawn.mean(axis=0) - value, rtol=0, atol=1e-9 * error.max()
    )
    np.testing.assert_allclose(
        with_resamples[f"{label}_interval"],
        np.stack([value - stretch * (high - value), value - stretch * (low - value)], axis=1),
        rtol=0,
        atol=1e-6 * error.max(),
    )
    np.testing.assert_allclose(
        with_resamples[f"{label}_block_sensitivity"],
        block_sensitivity(evaluation.blocks, resamples.block_lengths),
        rtol=1e-12,
    )


def test_answers_per_count_in_another_unit_are_multiples(
    oscillators: rw.DensityOfStates, resamples: Resamples, with_resamples: xr.Dataset
) -> None:
    """20 oscillators; thermochemical kilocalories."""
    keywords = {"of": ["energy", "size.mean"], "per_count": True, "energy_unit": "kcal/mol"}
    shown = rw.curve(oscillators, ASKED, resamples=resamples, **keywords)
    drawn = rw.resampled(oscillators, resamples, ASKED, **keywords)
    plain = rw.resampled(oscillators, resamples, ASKED, of=["energy", "size.mean"])

    for suffix in ("", "_standard_error", "_interval", "_bias"):
        np.testing.assert_allclose(
            shown[f"mean_energy{suffix}"],
            with_resamples[f"mean_energy{suffix}"] / (20 * KILOCALORIE),
            rtol=1e-12,
        )
    np.testing.assert_array_equal(
        shown["mean_energy_block_sensitivity"], with_resamples["mean_energy_block_sensitivity"]
    )
    np.testing.assert_allclose(drawn["mean_energy"], plain["mean_energy"] / (20 * KILOCALORIE), rtol=1e-12)
    assert drawn["mean_energy"].attrs["units"] == shown["mean_energy_bias"].attrs["units"] == "kcal mol-1"
    # No link to standard errors: there are none beside resamples.
    linked = dict(shown["mean_energy"].attrs)
    del linked["ancillary_variables"]
    assert drawn["mean_energy"].attrs == linked
    # "total" in words: the size of all oscillators together
    np.testing.assert_allclose(drawn["size_mean"], plain["size_mean"] / 20, rtol=1e-12)


def test_resampled_values_are_labelled(oscillators: rw.DensityOfStates, resamples: Resamples) -> None:
    dataset = rw.resampled(oscillators, resamples, ASKED)

    assert set(dataset.data_vars) == {"disconnected", "mean_energy", "heat_capacity"}
    assert dataset["mean_energy"].dims == ("resample", "temperature")
    assert dict(dataset.sizes) == {"resample": 400, "temperature": 2}
    np.testing.assert_array_equal(dataset["temperature"], ASKED)
    np.testing.assert_array_equal(dataset["resample"], np.arange(400))
    assert dataset["temperature"].attrs["units"] == "K"
    assert dataset["heat_capacity"].attrs["units"] == "kJ mol-1 K-1"
    assert dataset["disconnected"].dims == ("resample",)
    assert not dataset["disconnected"].any()
    assert dataset.attrs["errors"] == "block bootstrap"
    assert dataset.attrs["resamples"] == 400
    assert dataset.attrs["seed"] == 17


def test_resampled_values_can_be_written_and_are_not_overwritten(
    oscillators: rw.DensityOfStates, resamples: Resamples, tmp_path: Path
) -> None:
    dataset = rw.resampled(oscillators, resamples, ASKED)
    target = tmp_path / "resampled.nc"
    save_resampled(dataset, target)

    with xr.open_dataset(target) as written:
        for name in dataset.data_vars:
            np.testing.assert_array_equal(written[name], dataset[name])
            assert written[name].attrs["long_name"] == dataset[name].attrs["long_name"]
        assert written.attrs["seed"] == 17
    before = target.read_bytes()
    with pytest.raises(OutputError, match=r"resampled\.nc"):
        save_resampled(dataset.isel(resample=slice(10)), target)
    assert target.read_bytes() == before
    save_resampled(dataset.isel(resample=slice(10)), target, force=True)
    assert target.stat().st_size < len(before)


def test_differences_of_resampled_answers_keep_their_correlation(
    oscillators: rw.DensityOfStates, resamples: Resamples
) -> None:
    """Neighbouring temperatures go together: their difference scatters far less than either."""
    energy = rw.resampled(oscillators, resamples, [300.0, 301.0], of="energy")["mean_energy"]

    assert np.corrcoef(energy.T)[0, 1] > 0.99
    assert energy.diff("temperature").std() < 0.1 * energy.isel(temperature=0).std()


def test_another_reference_shifts_differences_only(
    oscillators: rw.DensityOfStates, resamples: Resamples
) -> None:
    """Counted from 310 K the free energy has no error there, and neither bias nor interval."""
    shifted = rw.curve(oscillators, [310.0, 320.0], of="free_energy", reference=310.0, resamples=resamples)

    for suffix in ("", "_standard_error", "_bias"):
        assert shifted[f"free_energy{suffix}"][0] == 0
        assert shifted[f"free_energy{suffix}"][1] != 0
    np.testing.assert_array_equal(shifted["free_energy_interval"][0], 0)
    assert shifted["free_energy_interval"][1].diff("bound") > 0


def test_out_of_reach_answers_have_no_bias_either(
    oscillators: rw.DensityOfStates, resamples: Resamples
) -> None:
    asked = [300.0, 900.0]
    kept = rw.curve(oscillators, asked, of="energy", resamples=resamples)
    beyond = rw.curve(oscillators, asked, of="energy", resamples=resamples, beyond_reach=True)

    # every block is one leaf, of which there is no half
    assert np.isnan(beyond["mean_energy_block_sensitivity"].sel(block_length="half")).all()
    for name in ("mean_energy_bias", "mean_energy_interval", "mean_energy_block_sensitivity"):
        one, other = (
            each[name].sel(block_length="twice") if name.endswith("sensitivity") else each[name]
            for each in (kept, beyond)
        )
        assert np.isnan(one.isel(temperature=1)).all()
        assert np.isfinite(one.isel(temperature=0)).all()
        assert np.isfinite(other).all()


def test_resamples_of_other_runs_are_refused(
    lattice: rw.DensityOfStates, oscillators: rw.DensityOfStates, resamples: Resamples
) -> None:
    message = "drawn from the combined runs that are asked; got those of others. Draw them again with draw_resamples"
    with pytest.raises(InputError, match=message):
        rw.curve(lattice, 2.2, resamples=resamples)
    with pytest.raises(InputError, match=message):
        rw.resampled(lattice, resamples, 2.2)


def test_the_seed_makes_the_resamples(oscillators: rw.DensityOfStates, resamples: Resamples) -> None:
    again, other = (rw.draw_resamples(oscillators, 400, seed=seed) for seed in (17, 18))
    one, same, different = (
        rw.resampled(oscillators, each, ASKED)["mean_energy"].to_numpy() for each in (resamples, again, other)
    )

    np.testing.assert_array_equal(one, same)
    assert (one != different).all()
    assert rw.draw_resamples(oscillators, 10).seed == 0  # never a hidden random state


def test_progress_counts_every_resample(oscillators: rw.DensityOfStates) -> None:
    solved: list[int] = []
    rw.draw_resamples(oscillators, 23, progress=solved.append)

    assert sum(solved) == 23


def test_a_run_too_short_is_named() -> None:
    rng = np.random.default_rng(3)
    runs = {"long": rng.gamma(30.0, 1.0, 400), "short": rng.gamma(30.0, 1.1, 20)}
    combined = rw.combine(runs, temperatures=[1.0, 1.1], discard=0)

    with pytest.raises(
        TooShortError, match=r"run 'short' has .* Sample it longer, or use linear-response errors"
    ) as caught:
        rw.draw_resamples(combined, 10)
    assert caught.value.run == "short"


def test_blocks_are_five_inefficiencies_long(oscillators: rw.DensityOfStates, resamples: Resamples) -> None:
    for run, length in zip(oscillators.runs, resamples.block_lengths, strict=True):
        assert length * run.leaf_rows[0] >= 5 * run.decision.inefficiency.value
        assert length * run.leaf_rows[0] >= 5 * run.decision.weight_inefficiency


def test_a_skewed_set_of_resamples_gives_the_reflected_interval() -> None:
    """Resamples 0, 1, ..., 8, 18 about an estimate of 3; at level 0.8 their quantiles are 0.9 and 9.

    Mean 5.4, sum of squared deviations 528 - 291.6 = 236.4 and standard deviation sqrt(236.4 / 9) = 5.1251.  With an
    error of twice that, and no end of degrees of freedom, the interval is 3 - 2 (9 - 3) to 3 + 2 (3 - 0.9).
    """
    resampled = np.array([*range(9), 18.0])[:, None]
    assert resampled.std(ddof=1) == pytest.approx(np.sqrt(236.4 / 9))

    interval = rescaled_interval(
        np.array([3.0]), resampled, np.array([2 * np.sqrt(236.4 / 9)]), np.array([np.inf]), 0.8
    )
    np.testing.assert_allclose(interval, [[-9.0, 7.2]], rtol=1e-12)

    # Student's t with 4 degrees of freedom reaches 1.5332 where the normal distribution reaches 1.2816 (tables).
    wider = rescaled_interval(
        np.array([3.0]), resampled, np.array([2 * np.sqrt(236.4 / 9)]), np.array([4.0]), 0.8
    )
    np.testing.assert_allclose((wider - 3) / (interval - 3), 1.5332 / 1.2816, rtol=1e-4)


def test_resamples_without_a_solution_are_left_out_and_those_without_spread_give_the_estimate() -> None:
    resampled = np.column_stack([np.arange(10.0), np.full(10, 4.0)])
    gaps = np.insert(resampled, [0, 3, 10], np.nan, axis=0)
    value, error, freedom = np.array([4.5, 4.0]), np.array([2.0, 2.0]), np.array([9.0, 9.0])

    whole = rescaled_interval(value, resampled, error, freedom, 0.9)

    np.testing.assert_array_equal(rescaled_interval(value, gaps, error, freedom, 0.9), whole)
    np.testing.assert_array_equal(whole[1], 4.0)
    assert whole[0, 0] < 4.5 < whole[0, 1]
