"""Error bars beyond the plain ones: resampling, covariance, the peak found again."""

from __future__ import annotations

import csv
import json

import numpy as np
import xarray as xr

import reweight as rw


def test_bootstrap_intervals_are_those_of_python_and_name_their_seed(combined, reweight):
    asked = (
        "curve",
        combined,
        "--at",
        "310,320",
        "--errors",
        "bootstrap",
        "--resamples",
        "150",
        "--seed",
        "4",
    )
    answer = json.loads(reweight(*asked, "--json").stdout)

    opened = rw.open_combined(combined)
    dataset = rw.curve(opened, [310, 320], resamples=rw.draw_resamples(opened, 150, seed=4))
    assert answer["errors"] == "bootstrap"
    assert answer["seed"] == 4
    assert answer["resamples"] == 150
    assert answer["disconnected_resamples"] == 0
    for name in ("heat_capacity_interval", "heat_capacity_bias"):
        assert answer[name] == dataset[name].to_numpy().tolist()
    linear = json.loads(reweight("curve", combined, "--at", "310,320", "--json").stdout)
    assert answer["heat_capacity_standard_error"] == linear["heat_capacity_standard_error"]
    assert answer["heat_capacity_interval"] != linear["heat_capacity_interval"]
    assert linear["seed"] is None
    assert "heat_capacity_bias" not in linear


def test_resampling_tells_what_other_blocks_would_give(combined, reweight):
    outcome = reweight("curve", combined, "--at", "310", "--errors", "bootstrap", "--resamples", "50")

    assert "intervals from 50 resamples (seed 0)" in outcome.stderr
    assert "mean energy: standard error from other blocks over that from the blocks used: half as long" in (
        outcome.stderr
    )


def test_resampled_answers_are_written_and_read_again(combined, reweight, tmp_path):
    written = tmp_path / "resamples.nc"
    asked = (
        "curve",
        combined,
        "--at",
        "310,320",
        "--errors",
        "bootstrap",
        "--resamples",
        "60",
        "--per-count",
    )
    outcome = reweight(*asked[:-1], "--save-resamples", written)

    assert outcome.status == 0
    with xr.open_dataset(written) as dataset:
        assert dict(dataset.sizes) == {"resample": 60, "temperature": 2}
        assert dataset.attrs["seed"] == 0
        opened = rw.open_combined(combined)
        again = rw.resampled(opened, rw.draw_resamples(opened, 60), [310, 320])
        np.testing.assert_array_equal(dataset["mean_energy"], again["mean_energy"])
    refused = reweight(*asked[:-1], "--save-resamples", written)
    assert refused.status == 2
    assert "exists" in refused.stderr


def test_the_covariance_table_holds_the_squared_standard_errors(combined, reweight, tmp_path):
    table = tmp_path / "covariance.csv"
    answer = json.loads(
        reweight(
            "curve", combined, "--at", "305,320", "--covariance", table, "--json", "--energy-unit", "eV"
        ).stdout
    )

    with table.open(newline="") as lines:
        header, *rows = csv.reader(lines)
    assert header[3:] == [
        "mean_energy at 305",
        "mean_energy at 320",
        "heat_capacity at 305",
        "heat_capacity at 320",
    ]
    assert [row[:3] for row in rows][1:3] == [
        ["mean_energy", "320.0", answer["units"]["mean_energy"]],
        ["heat_capacity", "305.0", answer["units"]["heat_capacity"]],
    ]
    matrix = np.array([row[3:] for row in rows], float)
    errors = [*answer["mean_energy_standard_error"], *answer["heat_capacity_standard_error"]]
    np.testing.assert_allclose(np.sqrt(np.diag(matrix)), errors, rtol=1e-12)
    np.testing.assert_array_equal(matrix, matrix.T)


def test_a_peak_is_found_again_in_every_resample(lattice_file, reweight):
    answer = json.loads(reweight("peak", lattice_file, "--resamples", "200", "--seed", "2", "--json").stdout)

    (peak,) = (each for each in answer["peaks"] if each["stands_out"])
    assert answer["seed"] == 2
    assert answer["resamples"] == 200
    assert answer["errors"] == "linear"
    assert peak["highest_share"] > 0.95
    assert peak["found_share"] > 0.95
    assert abs(peak["temperature_bias"]) < peak["temperature_standard_error"]
    assert abs(peak["height_bias"]) < peak["height_standard_error"]
    assert "resampling: bias" in reweight("peak", lattice_file, "--resamples", "200").stdout


def test_bootstrap_intervals_of_a_peak_keep_its_standard_errors(lattice_file, reweight):
    linear, resampled = (
        json.loads(reweight("peak", lattice_file, "--resamples", "200", "--json", *more).stdout)["peaks"][0]
        for more in ((), ("--errors", "bootstrap"))
    )

    assert resampled["temperature_standard_error"] == linear["temperature_standard_error"]
    assert resampled["temperature_interval"] != linear["temperature_interval"]
    low, high = resampled["temperature_interval"]
    assert low < resampled["temperature"] < high
