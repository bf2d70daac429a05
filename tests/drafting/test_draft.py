"""From files to studies: what is certain, what is asked, and what combine makes of it."""

from __future__ import annotations

import os

import netCDF4
import numpy as np
import pytest

import reweight as rw
from reweight.datasets import shipped
from reweight.drafting import Sureness, draft_studies, study_text
from reweight.errors import DataFileError, StudyError
from reweight.study import load_study, parse_study

TEMPERATURES = (300.0, 320.0, 340.0, 360.0)


def only(paths):
    (found,) = draft_studies(paths)
    return found


def parsed(draft, folder):
    return parse_study(study_text(draft, folder), folder=folder)


@pytest.mark.parametrize(
    "header", ["t[ps] potential[kJ/mol]", "time (ps) E_pot (kJ/mol)", "step U[kJ/mol]", "MCS PotEng [kJ/mol]"]
)
def test_clean_files_combine_without_an_edit(write_runs, tmp_path, header):
    found = only(write_runs(header))
    path = tmp_path / "study.toml"
    path.write_text(study_text(found, tmp_path), encoding="utf-8")

    assert found.open_keys == ()
    assert found.keys["energy_unit"].sureness is Sureness.CERTAIN
    combined = rw.combine(path)
    assert combined.temperatures.tolist() == list(TEMPERATURES)
    assert combined.description.energy_unit == "kJ/mol"


def test_a_missing_unit_is_asked_and_the_one_that_fits_comes_first(write_runs, tmp_path):
    found = only(write_runs("t[ps] potential"))

    assert found.open_keys == ("energy_unit",)
    assert found.keys["energy_unit"].candidates[0] == "kJ/mol"
    with pytest.raises(StudyError, match=r"energy_unit must be filled in.*'kJ/mol' or 'kcal/mol'"):
        parsed(found, tmp_path)


def test_a_unit_that_is_not_what_the_header_says_is_asked(write_runs):
    """Energies in kcal/mol under a heading that says kJ/mol; 1 kcal = 4.184 kJ (thermochemical calorie)."""
    unit = only(write_runs("t[ps] potential[kJ/mol]", factor=1 / 4.184)).keys["energy_unit"]

    assert unit.candidates == ("kcal/mol", "kJ/mol")
    assert "times as much as their fluctuations allow" in unit.why


def test_energies_per_atom_under_a_plain_heading_are_asked(write_runs):
    found = only(write_runs("t[ps] potential[kJ/mol]", factor=1 / 30))

    assert "system.energies_are" in found.open_keys
    assert found.keys["system.energies_are"].candidates == ("total", "per atom")


def test_energies_per_atom_ask_for_the_count_unless_a_remark_tells_it(write_runs, tmp_path):
    asked = only(write_runs("t[ps] potential[kJ/mol/atom]", factor=1 / 30))
    told = only(write_runs("t[ps] potential[kJ/mol/atom]", factor=1 / 30, remark="liquid of 30 atoms"))

    assert asked.open_keys == ("system.count",)
    assert told.open_keys == ()
    study = parsed(told, tmp_path)
    assert (study.system.energy_multiplier, study.system.per) == (30, "atom")


def test_energy_alone_asks_for_its_kind(write_runs):
    assert only(write_runs("t[ps] energy[kJ/mol]")).open_keys == ("energy_kind",)


def test_a_remark_tells_unit_and_kind(write_runs):
    found = only(write_runs("t[ps] energy", remark="potential energies in kJ/mol"))

    assert found.open_keys == ()
    assert found.keys["energy_unit"].value == "kJ/mol"
    assert found.keys["energy_kind"].value == "potential"


@pytest.mark.parametrize(
    ("header", "key", "candidates"),
    [
        ("x[kJ/mol] y[kJ/mol]", "columns.energy", ("x", "y")),
        ("E_pot[kJ/mol] U[kJ/mol]", "columns.energy", ("E_pot", "U")),
    ],
)
def test_columns_that_may_be_the_energy_are_asked(tmp_path, energies, header, key, candidates):
    path = tmp_path / "300K.dat"
    np.savetxt(path, np.column_stack([energies(300.0), energies(300.0)]), header=header)

    assert only([path]).keys[key].candidates == candidates


def test_columns_without_names_are_asked_by_position(tmp_path, energies):
    path = tmp_path / "300K.dat"
    np.savetxt(path, np.column_stack([np.arange(2000), energies(300.0), energies(300.0)]))

    assert only([path]).keys["columns.energy"].candidates == (2, 3)


def test_sizes_become_studies_of_their_own(tmp_path):
    rng = np.random.default_rng(3)
    paths = []
    for length in (16, 8):
        for temperature in (2.1, 2.3):
            paths.append(tmp_path / f"L={length}_T={temperature}.dat")
            rows = np.column_stack([np.arange(200), -rng.poisson(50, 200), rng.normal(size=200)])
            np.savetxt(paths[-1], rows, header="sweep energy m")

    found = draft_studies(paths)

    assert [each.label for each in found] == ["L16", "L8"]
    assert [each.keys["system.length"].value for each in found] == [16, 8]
    assert [len(each.runs) for each in found] == [2, 2]
    assert [offer.name for offer in found[0].offers] == ["m"]


def test_files_with_other_columns_become_another_study(write_runs, tmp_path, energies):
    paths = write_runs("t[ps] potential[kJ/mol]")
    other = tmp_path / "400K.dat"
    np.savetxt(other, energies(400.0), header="potential[kJ/mol]")

    found = draft_studies([*paths, other])

    assert [len(each.runs) for each in found] == [4, 1]
    assert len({each.label for each in found}) == 2
    assert all(each.label for each in found)


def test_one_column_in_two_units_becomes_two_studies(write_runs):
    """A study has one unit of energy, so files in another one must not come into it."""
    one = write_runs("t[ps] potential[kJ/mol]")
    other = write_runs("t[ps] potential[kcal/mol]", name="c{:.0f}K.dat", factor=1 / 4.184)
    unsaid = write_runs("t[ps] potential", name="u{:.0f}K.dat")

    found = draft_studies([*one, *other, *unsaid])

    assert [each.keys["energy_unit"].value for each in found] == ["kJ/mol", "kcal/mol", None]


def test_parts_that_follow_in_time_become_one_run(tmp_path, energies):
    """Given in the wrong order, and with an overlap as a restart leaves it."""
    rows = np.column_stack([0.5 * np.arange(2000), energies(300.0)])
    np.savetxt(tmp_path / "300K_b.dat", rows[:1100], header="t[ps] potential[kJ/mol]")
    np.savetxt(tmp_path / "300K_a.dat", rows[1000:], header="t[ps] potential[kJ/mol]")

    (run,) = only([tmp_path / "300K_a.dat", tmp_path / "300K_b.dat"]).runs

    assert [path.name for path in run.files] == ["300K_b.dat", "300K_a.dat"]


def test_two_runs_at_one_temperature_stay_apart(tmp_path, energies):
    for name in ("300K_a.dat", "300K_b.dat"):
        rows = np.column_stack([0.5 * np.arange(2000), energies(300.0)])
        np.savetxt(tmp_path / name, rows, header="t[ps] potential[kJ/mol]")

    assert len(only([tmp_path / "300K_a.dat", tmp_path / "300K_b.dat"]).runs) == 2


@pytest.mark.parametrize(
    ("files", "table", "mixed"), [(4, "replica", True), (1, "run", True), (2, "run", False)]
)
def test_a_column_of_set_temperatures_makes_replicas_or_one_scan(tmp_path, energies, files, table, mixed):
    rng = np.random.default_rng(2)
    for number in range(files):
        temperatures = np.repeat(TEMPERATURES, 100)
        if mixed:
            rng.shuffle(temperatures)
        rows = np.column_stack([np.arange(400), temperatures, energies(330.0)[:400]])
        np.savetxt(tmp_path / f"r{number}.dat", rows, header="step T[K] potential[kJ/mol]", fmt="%.6f")

    found = only(sorted(tmp_path.glob("r*.dat")))

    assert {run.table for run in found.runs} == {table}
    assert found.keys["columns.temperature"].value == "T"
    assert found.open_keys == ()
    assert len(parsed(found, tmp_path).replicas) == (files if table == "replica" else 0)


def test_a_thermostat_printed_in_whole_kelvin_makes_no_replicas(tmp_path, energies):
    temperatures = np.rint(np.random.default_rng(4).normal(300.0, 3.0, 2000))
    rows = np.column_stack([temperatures, energies(300.0)])
    np.savetxt(tmp_path / "300K.dat", rows, fmt=["%d", "%.6f"], header="T[K] potential[kJ/mol]")

    found = only([tmp_path / "300K.dat"])

    assert "columns.temperature" not in found.keys
    assert found.runs[0].guess.value == 300.0


def test_a_fluctuating_volume_asks_for_the_pressure(tmp_path, energies):
    rng = np.random.default_rng(2)
    rows = np.column_stack([energies(300.0), rng.normal(30.0, 1.0, 2000)])
    np.savetxt(tmp_path / "300K.dat", rows, header="potential[kJ/mol] V[nm^3]")
    np.savetxt(tmp_path / "told_300K.dat", rows, header="P = 2.5 bar\npotential[kJ/mol] V[nm^3]")

    asked, told = (only([tmp_path / name]) for name in ("300K.dat", "told_300K.dat"))

    assert asked.open_keys == ("conditions.pressure",)
    assert asked.keys["columns.volume_unit"].value == "nm^3"
    assert told.keys["conditions.pressure"].value == "2.5 bar"


def test_attributes_of_netcdf_files_are_read(tmp_path, energies):
    paths = []
    for temperature in TEMPERATURES:
        paths.append(tmp_path / f"run{len(paths)}.nc")
        with netCDF4.Dataset(paths[-1], "w") as dataset:
            dataset.createDimension("sample", 2000)
            dataset.temperature = temperature
            dataset.n_atoms = np.int32(30)
            variable = dataset.createVariable("epot", "f8", ("sample",))
            variable.units = "kJ mol-1"
            variable[:] = energies(temperature)

    found = only(paths)

    assert found.open_keys == ()
    assert [run.guess.value for run in found.runs] == list(TEMPERATURES)
    assert found.runs[0].guess.sureness is Sureness.CERTAIN
    assert found.keys["system.count"].value == 30


def test_temperatures_that_may_be_celsius_are_asked(write_runs):
    found = only(write_runs("t[ps] potential[kJ/mol]", name="T_{:.0f}.dat")[:1])
    assert found.keys["temperature_unit"].value == "K"

    cold = write_runs("t[ps] potential[kJ/mol]", name="T_{:.0f}.dat")[0].rename("T_26.dat")
    assert only([cold]).keys["temperature_unit"].candidates == ("K", "degC")
    cold.unlink()


def test_files_that_cannot_be_read_are_left_out_with_their_reason(write_runs, tmp_path):
    paths = write_runs("t[ps] potential[kJ/mol]")
    (tmp_path / "380K.dat").write_text("")
    (tmp_path / "notes.txt").write_text("remember\nthe milk\n")

    found = only([*paths, tmp_path / "380K.dat", tmp_path / "notes.txt"])
    study = parsed(found, tmp_path)

    assert [(run.name, run.use) for run in study.runs][-1] == ("380K", False)
    assert "empty" in study.runs[-1].reason
    assert [look.path.name for look in found.unplaced] == ["notes.txt"]
    assert "# not in the study: " in study_text(found, tmp_path)


def test_a_damaged_file_stays_a_run_that_combine_refuses(write_runs, tmp_path):
    paths = write_runs("t[ps] potential[kJ/mol]")
    lines = paths[1].read_text().splitlines(keepends=True)
    paths[1].write_text("".join([*lines[:500], "250.0\n", *lines[501:]]))

    found = only(paths)

    assert [run.left_out for run in found.runs] == [""] * 4
    (tmp_path / "study.toml").write_text(study_text(found, tmp_path))
    with pytest.raises(DataFileError, match=r"320K\.dat, line 501"):
        rw.combine(tmp_path / "study.toml")


@pytest.mark.parametrize("bad", ["nan", "*****", "NA"])
def test_a_number_that_is_none_does_not_change_what_the_columns_are(write_runs, tmp_path, bad):
    """In the first file, too, and in the column of energies."""
    paths = write_runs("t[ps] potential[kJ/mol]")
    lines = paths[0].read_text().splitlines(keepends=True)
    paths[0].write_text("".join([*lines[:11], f"5.0 {bad}\n", *lines[12:]]))

    found = only(paths)

    assert found.open_keys == ()
    assert found.keys["columns.energy"].value == "potential"
    assert "line 12" in found.runs[0].looks[0].trouble


def test_decimal_commas_are_declared_when_only_so_all_columns_are_numbers(write_runs, tmp_path):
    for path in (paths := write_runs("t[ps] potential[kJ/mol]")):
        path.write_text(path.read_text().replace(".", ","))
    (tmp_path / "study.toml").write_text(study_text(only(paths), tmp_path))

    assert load_study(tmp_path / "study.toml").format.decimal in (",", None)
    assert rw.combine(tmp_path / "study.toml").temperatures.size == 4


def log(path, energies, header="Step PotEng Temp", banner="Engine 1.0\nThermostat temperature: 300 K\n"):
    rows = [f"{number} {energy:.6f} {300 + number % 7}\n" for number, energy in enumerate(energies)]
    path.write_text(
        f"{banner}{header}\n{''.join(rows[:900])}WARNING: slow\n{header}\n{''.join(rows[900:])}Bye\n"
    )
    return path


def test_the_table_in_a_log_is_found(tmp_path, energies):
    found = only([log(tmp_path / "a.log", energies(300.0))])

    assert found.keys["format.table"].value == "Step PotEng Temp"
    assert found.runs[0].guess.value == 300.0
    assert found.runs[0].looks[0].rows == 2000


def test_a_file_that_begins_with_its_header_is_no_log(tmp_path, energies):
    """Else its damaged lines would be passed over."""
    path = log(tmp_path / "300K.dat", energies(300.0), banner="")

    with pytest.raises(DataFileError, match=r"300K\.dat, line 902: rows must have 3 columns"):
        draft_studies([path])


def test_pipes_are_not_opened(write_runs, tmp_path):
    """Nothing would ever come out of one."""
    os.mkfifo(tmp_path / "400K.dat")

    found = only([*write_runs("t[ps] potential[kJ/mol]"), tmp_path / "400K.dat"])

    assert "plain file" in found.runs[-1].left_out


def test_a_file_that_is_not_there_is_refused(write_runs, tmp_path):
    with pytest.raises(DataFileError, match=r"no\.dat: data file must be there; 1 of 5 are not"):
        draft_studies([*write_runs("t[ps] potential[kJ/mol]"), tmp_path / "no.dat"])


def test_nothing_readable_at_all_is_refused(tmp_path):
    (tmp_path / "a.dat").write_text("")
    (tmp_path / "b.dat").write_text("")

    with pytest.raises(DataFileError, match=r"it is empty.*\(1 more file cannot be read either\)"):
        draft_studies([tmp_path / "a.dat", tmp_path / "b.dat"])


def test_files_are_named_relative_to_the_study_even_through_a_link(write_runs, tmp_path):
    """Through the link, .. would lead elsewhere."""
    paths = write_runs("t[ps] potential[kJ/mol]", name="data/{:.0f}K.dat")
    (tmp_path / "deep" / "er").mkdir(parents=True)
    (tmp_path / "link").symlink_to(tmp_path / "deep" / "er")
    study = tmp_path / "link" / "study.toml"

    study.write_text(study_text(only(paths), study.parent))

    assert load_study(study).runs[0].files == ("../../data/300K.dat",)
    assert rw.combine(study).temperatures.size == 4


def test_the_shipped_runs_are_drafted_as_they_are_described():
    """The draft of the chain's files agrees with its study."""
    folder = shipped("bead-chain")
    described = load_study(folder / "study.toml")

    drafted = parsed(only([folder / file for run in described.runs for file in run.files]), folder)

    assert drafted.energy_unit == described.energy_unit
    assert drafted.energy_kind == described.energy_kind
    assert drafted.columns.energy == described.columns.energy
    assert [run.temperature for run in drafted.runs] == [run.temperature for run in described.runs]
    assert [run.files for run in drafted.runs] == [run.files for run in described.runs]
