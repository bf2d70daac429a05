"""What the commands print, for people and for machines."""

from __future__ import annotations

import csv
import json
import re

import numpy as np
import pytest

import reweight as rw
from reweight.cli.application import main

GAS_CONSTANT = 8.31446261815324e-3  # kJ/(mol K), exact by definition (SI 2019)
SHAPE = 30.0  # of the Gamma-distributed energies in the study: C = SHAPE R, E = SHAPE R T


def test_the_first_screen_is_short_and_says_what_to_do_next(study, reweight):
    outcome = reweight("combine", study)

    assert outcome.status == 0
    assert outcome.stderr == ""
    assert len(outcome.stdout.splitlines()) < 12
    assert "8,000 rows read from 2 files" in outcome.stdout
    assert re.search(r"one in [\d.]+\(\d+\)", outcome.stdout)
    assert "these runs support heat capacities from" in outcome.stdout
    assert "next: reweight curve" in outcome.stdout
    for hidden in ("tally", "node", "panel"):
        assert hidden not in outcome.stdout


def test_a_curve_agrees_with_the_exact_answer_within_its_error(combined, reweight):
    outcome = reweight("curve", combined, "--at", "310,320", "--json")

    answer = json.loads(outcome.stdout)
    assert outcome.status == 0
    assert answer["form"] == "reweight curve 1"
    assert answer["units"] == {"temperature": "K", "mean_energy": "kJ mol-1", "heat_capacity": "kJ mol-1 K-1"}
    assert answer["verdict"] == "sound"
    exact = SHAPE * GAS_CONSTANT
    for place, temperature in enumerate(answer["temperature"]):
        assert abs(answer["heat_capacity"][place] - exact) < 4 * answer["heat_capacity_standard_error"][place]
        assert (
            abs(answer["mean_energy"][place] - exact * temperature)
            < 4 * answer["mean_energy_standard_error"][place]
        )
        assert answer["heat_capacity_standard_error"][place] < 0.05 * exact
    assert "at 310, 320 K" in outcome.stderr


def test_python_and_the_command_line_give_the_same_numbers(combined, reweight):
    answer = json.loads(reweight("curve", combined, "--points", "5", "--json").stdout)
    dataset = rw.curve(rw.open_combined(combined), points=5)

    for name in ("temperature", "mean_energy", "heat_capacity_standard_error"):
        assert answer[name] == dataset[name].to_numpy().tolist()


def test_answers_out_of_reach_are_null_counted_and_marked(combined, reweight):
    masked = reweight("curve", combined, "--at", "310", "--at", "600", "--json")
    answer = json.loads(masked.stdout)
    assert masked.status == 0
    assert answer["heat_capacity"][1] is None
    assert answer["within_reach"] == [True, False]
    assert "1 of 2 temperatures out of reach" in masked.stderr

    shown = json.loads(reweight("curve", combined, "--at", "600", "--beyond-reach", "--json").stdout)
    assert shown["heat_capacity"][0] is not None
    assert shown["within_reach"] == [False]


def test_answers_per_count_and_in_another_unit_are_scaled(combined, reweight):
    total = json.loads(reweight("curve", combined, "--at", "310", "--json").stdout)
    per = json.loads(
        reweight("curve", combined, "--at", "310", "--per-count", "--energy-unit", "eV", "--json").stdout
    )

    kilojoule_per_mole_in_ev = (
        8.617333262145179e-5 / GAS_CONSTANT
    )  # ratio of the exact Boltzmann constants (SI 2019)
    expected = np.array(total["mean_energy_interval"]) / 20 * kilojoule_per_mole_in_ev
    np.testing.assert_allclose(per["mean_energy_interval"], expected, rtol=1e-9)
    assert per["units"]["heat_capacity"] == "eV K-1"


def test_a_curve_without_a_peak_says_that_none_stands_out(combined, reweight):
    outcome = reweight("peak", combined)

    assert outcome.status == 0
    assert "none stands out" in outcome.stdout or "no maximum inside" in outcome.stdout


def test_a_table_for_machines_holds_all_digits(combined, tmp_path, reweight):
    target = tmp_path / "curve.csv"
    answer = json.loads(reweight("curve", combined, "--points", "3", "--csv", target, "--json").stdout)

    with target.open(newline="") as stream:
        rows = list(csv.reader(stream))
    assert rows[0][:3] == [
        "temperature [K]",
        "mean_energy [kJ mol-1]",
        "mean_energy_standard_error [kJ mol-1]",
    ]
    assert [float(row[1]) for row in rows[1:]] == answer["mean_energy"]


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_pictures_are_the_same_bytes_every_time(combined, tmp_path, reweight, ending):
    first, second = tmp_path / f"first.{ending}", tmp_path / f"second.{ending}"

    assert reweight("curve", combined, "--plot", first).status == 0
    assert reweight("peak", combined, "--plot", tmp_path / f"peak.{ending}").status == 0
    assert reweight("curve", combined, "--plot", second).status == 0

    assert first.stat().st_size > 1000
    assert first.read_bytes() == second.read_bytes()


def test_a_weak_link_ends_with_status_3_and_is_remembered(study, reweight):
    rng = np.random.default_rng(8)
    for name, temperature in (("cold", 300.0), ("hot", 1050.0)):
        rows = np.column_stack([np.arange(4000), rng.gamma(SHAPE, GAS_CONSTANT * temperature, 4000)])
        np.savetxt(study.parent / f"{name}.dat", rows, fmt=["%d", "%.8f"], header="step potential")
    study.write_text(study.read_text().replace("330.0", "1050.0"))

    outcome = reweight("combine", study)
    assert outcome.status == 3
    assert "unsound: cold and hot share" in outcome.stdout
    assert "add a run near" in outcome.stdout

    later = reweight("curve", study.with_suffix(".nc"), "--at", "310")
    assert later.status == 0
    assert len(re.findall("unsound", later.stderr)) == 1


def test_a_run_too_short_for_its_correlation_ends_with_status_3(study, reweight):
    rng = np.random.default_rng(9)
    steps = np.repeat(
        rng.gamma(SHAPE, GAS_CONSTANT * 300.0, 20), 200
    )  # twenty values, each held for 200 rows
    rows = np.column_stack([np.arange(4000), steps])
    np.savetxt(study.parent / "cold.dat", rows, fmt=["%d", "%.8f"], header="step potential")

    outcome = reweight("combine", study, "--json")

    assert outcome.status == 3
    findings = {
        each["offender"]: each for each in json.loads(outcome.stdout)["findings"] if each["check"] == "length"
    }
    assert findings["cold"]["verdict"] == "unsound"
    assert findings["hot"]["verdict"] == "sound"


def test_the_demo_does_the_whole_job(tmp_path, reweight):
    folder = tmp_path / "demo"

    outcome = reweight("demo", folder)

    assert outcome.status == 0, outcome.stderr
    assert "peaks at" in outcome.stdout
    assert (folder / "bead-chain" / "study.nc").exists()
    assert (folder / "bead-chain" / "curves.png").stat().st_size > 10_000
    assert reweight("demo", folder).status == 2  # an existing folder is not touched


def test_help_lists_every_command_with_what_it_is_for(reweight):
    outcome = reweight("--help")

    assert outcome.status == 0
    for command in ("combine", "curve", "peak", "demo"):
        assert re.search(rf"^  {command} +\w", outcome.stdout, re.MULTILINE)


def test_an_internal_fault_is_told_from_a_refusal(monkeypatch, capsys, combined):
    def fail(*_args, **_kwargs):
        raise RuntimeError("broken inside")

    monkeypatch.setattr("reweight.saving.open_combined", fail)
    with pytest.raises(SystemExit) as ended:
        main(["curve", str(combined)])
    assert ended.value.code == 1
    assert "broken inside" in capsys.readouterr().err

    with pytest.raises(RuntimeError, match="broken inside"):
        main(["--debug", "curve", str(combined)])


def test_an_interruption_leaves_nothing_behind(monkeypatch, study, reweight):
    def interrupt(*_args, **_kwargs):
        raise KeyboardInterrupt

    monkeypatch.setattr("reweight.saving._write", interrupt)
    before = sorted(study.parent.iterdir())

    assert reweight("combine", study).status == 130
    assert sorted(study.parent.iterdir()) == before


def test_a_peak_is_one_row_of_plain_cells_with_units(combined, tmp_path, reweight):
    target = tmp_path / "peak.csv"
    answer = json.loads(reweight("peak", combined, "--csv", target, "--json").stdout)

    with target.open(newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert len(rows) == len(answer["peaks"])
    assert float(rows[0]["height [kJ mol-1 K-1]"]) == answer["peaks"][0]["height"]
    assert float(rows[0]["height_lower [kJ mol-1 K-1]"]) == answer["peaks"][0]["height_interval"][0]
    assert not any("{" in cell or "None" in cell for row in rows for cell in row.values())
    shares = [float(value) for name, value in rows[0].items() if name.startswith("height_variance_share")]
    assert sum(shares) == pytest.approx(1)


def test_a_temperature_out_of_reach_is_told_why(combined, reweight):
    outcome = reweight("curve", combined, "--at", "310,700")

    assert re.search(r"heat_capacity: within \d+\.\d to \d+\.\d; colder: .*; hotter: ", outcome.stderr)
