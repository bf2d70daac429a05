"""Volumes: enthalpies from files of several formats, and volumes that cannot be right."""

import netCDF4
import numpy as np
import pytest

from reweight.errors import DataFileError, StudyError
from reweight.reading import run_chunks
from reweight.study import parse_study

BAR_CUBIC_NANOMETRE = 0.0602214076  # kJ/mol; SI Brochure, 9th edition (2019), exact
ENERGY = np.array([-100.0, -101.5, -99.25])
VOLUME = np.array([20.0, 20.5, 19.75])


def study_in(folder, files, energy="E", system=""):
    names = ", ".join(f'"{name}"' for name in files)
    return parse_study(
        f'schema = 1\nenergy_unit = "kJ/mol"\n{system}\n[conditions]\npressure = "1000 bar"\n'
        f'[columns]\nenergy = "{energy}"\nvolume = "V"\nvolume_unit = "nm^3"\n[observables.size]\ncolumn = "V"\n'
        f"[[run]]\ntemperature = 300\nfiles = [{names}]\n",
        folder=folder,
    )


def read(study):
    ledgers = []
    return np.concatenate(list(run_chunks(study, study.runs[0], ledgers))), ledgers


def test_pressure_times_volume_is_added_whatever_the_format(tmp_path):
    (tmp_path / "a.csv").write_text(
        "V,E\n" + "".join(f"{v},{e}\n" for v, e in zip(VOLUME, ENERGY, strict=True))
    )
    with netCDF4.Dataset(tmp_path / "b.nc", "w") as dataset:
        dataset.createDimension("sample", 3)
        dataset.createVariable("E", "f8", ("sample",))[:] = ENERGY
        dataset.createVariable("V", "f8", ("sample",))[:] = VOLUME
    values, ledgers = read(study_in(tmp_path, ["a.csv", "b.nc"]))
    expected = ENERGY + 1000 * BAR_CUBIC_NANOMETRE * VOLUME
    np.testing.assert_allclose(values[:, 0], np.tile(expected, 2), rtol=1e-14)
    np.testing.assert_array_equal(values[:, 1], np.tile(VOLUME, 2))  # a volume may be an observable as well
    assert [each.first_energy for each in ledgers] == pytest.approx([expected[0]] * 2, rel=1e-14)


def test_energies_and_volumes_may_both_be_per_atom(tmp_path):
    (tmp_path / "a").write_text("E V\n-0.5 0.02\n-0.25 0.03\n")
    system = '[system]\ncount = 200\nenergies_are = "per atom"\nvolumes_are = "per atom"'
    values, _ = read(study_in(tmp_path, ["a"], system=system))
    expected = [-100 + 1000 * BAR_CUBIC_NANOMETRE * 4, -50 + 1000 * BAR_CUBIC_NANOMETRE * 6]
    np.testing.assert_allclose(values[:, 0], expected, rtol=1e-14)


@pytest.mark.parametrize("volume", ["0", "-20"])
def test_a_volume_that_is_not_positive_is_refused(tmp_path, volume):
    (tmp_path / "a").write_text(f"E V\n1 20\n2 {volume}\n3 21\n")
    with pytest.raises(
        DataFileError, match=r"row 2: volumes must be greater than 0; got .* \(1 of 3 such rows\)"
    ):
        read(study_in(tmp_path, ["a"]))


def test_a_volume_that_was_held_is_refused(tmp_path):
    (tmp_path / "a").write_text("E V\n" + "".join(f"{row} 20\n" for row in range(6)))
    (tmp_path / "b").write_text("E V\n" + "".join(f"{row} 20\n" for row in range(6)))
    with pytest.raises(
        DataFileError, match="volumes must fluctuate at constant pressure; got 20 in all 12 rows"
    ):
        read(study_in(tmp_path, ["a", "b"]))
    (tmp_path / "b").write_text("E V\n1 20.5\n")
    assert len(read(study_in(tmp_path, ["a", "b"]))[0]) == 7


def test_pressure_times_volume_is_not_added_twice(tmp_path):
    (tmp_path / "a").write_text("Enthalpy V\n1 20\n2 21\n")
    with pytest.raises(
        StudyError, match=r"columns.energy must be the energy without pressure times volume.*'Enthalpy'"
    ):
        read(study_in(tmp_path, ["a"], energy="Enthalpy"))


def test_enthalpies_too_large_for_a_number_are_refused(tmp_path):
    (tmp_path / "a").write_text("E V\n1 20\n1e308 1e307\n")
    with pytest.raises(DataFileError, match=r"row 2: the sum of columns .* must stay finite"):
        read(study_in(tmp_path, ["a"]))
