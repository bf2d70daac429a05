"""A worked enthalpy: molecules that do not see each other, at constant pressure.

N molecules share the volume V with the weight V^N exp(-p V / k_B T), so V is Gamma-distributed with shape N + 1 and scale
k_B T / p; n quadratic terms of the potential energy make it Gamma-distributed with shape n / 2 and scale k_B T, whatever
the volume.  Hence, exactly,

    <E + p V> = (n / 2 + N + 1) k_B T      C_p = (n / 2 + N + 1) k_B, and 3 N k_B / 2 more with the kinetic part,

which for n = 0 is the 5 N k_B / 2 of a monatomic ideal gas plus the k_B of one more volume: the isothermal-isobaric
partition function of D. A. McQuarrie, Statistical Mechanics (1976), chapter 3 (from memory), done for finite N.
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import scipy.constants

import reweight as rw
from reweight.cli.application import main

MOLECULES, TERMS, PRESSURE = 40, 60, 1000.0  # the last in bar
BAR_CUBIC_NANOMETRE = 0.0602214076  # kJ/mol; SI Brochure, 9th edition (2019), exact
GAS_CONSTANT = 8.31446261815324e-3  # kJ/mol/K; likewise
SAMPLES = 20_000
ENTHALPY = TERMS / 2 + MOLECULES + 1  # in k_B T, and heat capacity at constant pressure in k_B
KINETIC = 3 * MOLECULES / 2  # k_B
TEMPERATURES = (300.0, 330.0, 360.0)

STUDY = """\
schema = 1
title = "Forty molecules"
energy_unit = "kJ/mol"

[system]
count = 40
per = "molecule"
volumes_are = "per molecule"

[conditions]
pressure = "1000 bar"
degrees_of_freedom = 120

[columns]
energy = "E"
volume = "V"
volume_unit = "nm^3"
"""
RUN = '\n[[run]]\nname = "{0:g}K"\ntemperature = {0}\nfiles = ["{0:g}K.dat"]\n'
HELD = ("volumes_are", "pressure", "degrees_of_freedom", "volume ", "volume_unit")


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("pressure")
    rng = np.random.default_rng(20261201)
    for temperature in TEMPERATURES:
        thermal = GAS_CONSTANT * temperature
        energy = rng.gamma(TERMS / 2, thermal, SAMPLES)
        volume = rng.gamma(MOLECULES + 1, thermal / (PRESSURE * BAR_CUBIC_NANOMETRE), SAMPLES) / MOLECULES
        table = np.column_stack([energy, volume])
        np.savetxt(folder / f"{temperature:g}K.dat", table, fmt="%.12g", header="E V")
    path = folder / "study.toml"
    path.write_text(STUDY + "".join(RUN.format(temperature) for temperature in TEMPERATURES))
    return path


@pytest.fixture(scope="module")
def combined(study: Path) -> rw.DensityOfStates:
    return rw.combine(study)


def test_enthalpy_and_heat_capacity_are_the_exact_ones(combined: rw.DensityOfStates) -> None:
    """Four values at 4 standard errors: a false alarm in 4000 seeds."""
    answer = rw.curve(combined, [315.0, 345.0])
    exact = {
        "mean_energy": ENTHALPY * GAS_CONSTANT * answer.temperature,
        "heat_capacity": (ENTHALPY + KINETIC) * GAS_CONSTANT,
    }
    for label, expected in exact.items():
        error = answer[f"{label}_standard_error"]
        assert bool(np.all(abs(answer[label] - expected) < 4 * error))
        # 4 % of the kinetic part, 2 % of pV: leaving either out is seen
        assert bool(np.all(error < 0.012 * expected))


def test_names_say_what_was_answered(combined: rw.DensityOfStates) -> None:
    answer = rw.curve(combined, [315.0], of=combined.quantity_names)
    names = {
        label: answer[label].attrs["long_name"].split(",")[0] for label in ("mean_energy", "heat_capacity")
    }
    assert names == {"mean_energy": "mean enthalpy", "heat_capacity": "heat capacity at constant pressure"}
    assert answer.heat_capacity.attrs["comment"] == "includes 120 k_B / 2 from declared degrees of freedom"
    assert "comment" not in answer.mean_energy.attrs
    assert answer.free_energy.attrs["long_name"].startswith("Gibbs energy over k_B T")
    assert rw.distribution(combined, 315.0).probability.attrs["long_name"].endswith("of the enthalpy")
    assert rw.states(combined).energy.attrs["long_name"] == "enthalpy"
    assert combined.choices() == [
        "constant pressure, 1000 bar: the energy is the enthalpy",
        "heat capacity: includes 120 k_B / 2 from declared degrees of freedom",
    ]


def test_per_molecule_the_kinetic_part_is_shared_as_well(combined: rw.DensityOfStates) -> None:
    total, per = (rw.curve(combined, 315.0, of="heat_capacity", per_count=each) for each in (False, True))
    assert float(per.heat_capacity[0]) == pytest.approx(float(total.heat_capacity[0]) / MOLECULES, rel=1e-14)
    assert per.heat_capacity.attrs["long_name"] == "heat capacity at constant pressure per molecule"


def test_the_kinetic_part_is_added_and_nothing_else(study: Path, combined: rw.DensityOfStates) -> None:
    text = "".join(line for line in study.read_text().splitlines(True) if "degrees" not in line)
    (study.parent / "bare.toml").write_text(text)
    bare = rw.curve(rw.combine(study.parent / "bare.toml"), 315.0)
    whole = rw.curve(combined, 315.0)
    difference = float(whole.heat_capacity[0] - bare.heat_capacity[0])
    assert difference == pytest.approx(KINETIC * GAS_CONSTANT, rel=1e-12)
    assert float(whole.heat_capacity_standard_error[0]) == float(bare.heat_capacity_standard_error[0])
    assert float(whole.mean_energy[0]) == float(bare.mean_energy[0])
    assert "comment" not in bare.heat_capacity.attrs


def test_without_a_pressure_the_same_files_give_the_energy_and_its_name(study: Path) -> None:
    text = "".join(line for line in study.read_text().splitlines(True) if not line.startswith(HELD))
    (study.parent / "held.toml").write_text(text)
    answer = rw.curve(rw.combine(study.parent / "held.toml"), 315.0)
    assert answer.mean_energy.attrs["long_name"] == "mean energy"
    assert answer.heat_capacity.attrs["long_name"] == "heat capacity"
    expected = TERMS / 2 * GAS_CONSTANT
    assert abs(float(answer.heat_capacity[0]) - expected) < 4 * float(answer.heat_capacity_standard_error[0])


def test_runs_in_memory_and_saved_files_keep_the_meaning(
    study: Path, combined: rw.DensityOfStates, tmp_path: Path
) -> None:
    tree = rw.read_runs(rw.load_study(study))
    assert next(iter(tree.children.values()))["energy"].attrs["long_name"] == "enthalpy"
    rw.save(combined, tmp_path / "saved.nc")
    for again in (rw.combine(tree), rw.open_combined(tmp_path / "saved.nc")):
        assert again.description.pressure == "1000 bar"
        assert again.description.degrees_of_freedom == 120
        assert rw.curve(again, 315.0).identical(rw.curve(combined, 315.0))


def test_screens_say_it_and_names_in_json_stay(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    def run(*arguments: object) -> tuple[str, str]:
        with pytest.raises(SystemExit) as ended:
            main([str(each) for each in arguments])
        assert not ended.value.code
        return capsys.readouterr()

    combining, _ = run("combine", study, "--force")
    assert "enthalpies (potential energy + pV at 1000 bar) in kJ/mol" in combining
    assert "heat capacity at constant pressure" in combining
    file = study.with_suffix(".nc")
    table, told = run("curve", file, "--at", "315")
    assert "mean enthalpy [kJ mol-1]" in " ".join(table.split())
    assert "includes 120 k_B / 2 from declared degrees of freedom" in told
    record = json.loads(run("curve", file, "--at", "315", "--json")[0])
    assert {"mean_energy", "heat_capacity", "heat_capacity_standard_error"} <= set(record)
    assert "constant pressure, 1000 bar: the energy is the enthalpy" in run("show", file)[0]


def test_the_pressure_energy_agrees_with_the_unit_library_of_another_origin() -> None:
    """SciPy's table of constants against the exact product used above."""
    assert (
        pytest.approx(scipy.constants.bar * 1e-27 * scipy.constants.N_A / 1000, rel=1e-15)
        == BAR_CUBIC_NANOMETRE
    )
