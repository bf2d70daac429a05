"""From the files of a run to total energies and observables; columns by name, position and sum."""

import gzip
import os

import netCDF4
import numpy as np
import pytest

from reweight.errors import DataFileError, StudyError
from reweight.reading import FileLedger, open_table, resolve_columns, run_chunks
from reweight.study import Format, parse_study


def study_in(folder, files, extra=""):
    names = ", ".join(f'"{name}"' for name in files)
    return parse_study(
        f'schema = 1\nenergy_unit = "eV"\n{extra}\n[[run]]\nname = "r"\ntemperature = 300\nfiles = [{names}]\n',
        folder=folder,
    )


def read(study):
    ledgers = []
    return np.concatenate(list(run_chunks(study, study.runs[0], ledgers))), ledgers


def test_columns_are_found_summed_and_multiplied_by_the_count(tmp_path):
    (tmp_path / "a.dat").write_text("# t bonded[eV] m other\n0 1 0.5 10\n1 2 0.25 20\n")
    extra = (
        '[system]\ncount = 4\nenergies_are = "per atom"\n[columns]\nenergy = ["bonded", 4]\n'
        '[observables.order]\ncolumn = "m"\nis = "per site"\n[observables.both]\ncolumn = ["m", 1]\n'
    )
    values, (ledger,) = read(study_in(tmp_path, ["a.dat"], extra))
    np.testing.assert_array_equal(values, [[44, 0.5, 0.5], [88, 0.25, 1.25]])
    assert (ledger.path, ledger.rows_read, ledger.kept) == ("a.dat", 2, 2)
    assert (ledger.first_energy, ledger.last_energy) == (44, 88)
    assert ledger.balanced


def test_files_follow_each_other_whatever_their_format(tmp_path):
    (tmp_path / "a.csv").write_text("t,E\n0,1\n1,2\n")
    (tmp_path / "b").write_bytes(gzip.compress(b"E x\n3 0\n"))
    with netCDF4.Dataset(tmp_path / "c.txt", "w") as dataset:
        dataset.createDimension("sample", 1)
        dataset.createVariable("E", "f4", ("sample",))[:] = 4
    values, ledgers = read(study_in(tmp_path, ["a.csv", "b", "c.txt"], '[columns]\nenergy = "E"'))
    np.testing.assert_array_equal(values, [[1], [2], [3], [4]])
    assert [ledger.rows_read for ledger in ledgers] == [2, 1, 1]
    assert [ledger.first_energy for ledger in ledgers] == [1, 3, 4]
    assert all(ledger.sha256 and ledger.size for ledger in ledgers)


def test_single_column_needs_no_name_but_several_do(tmp_path):
    (tmp_path / "a").write_text("5\n6\n")
    np.testing.assert_array_equal(read(study_in(tmp_path, ["a"]))[0], [[5], [6]])
    (tmp_path / "a").write_text("x y\n5 6\n")
    with pytest.raises(StudyError, match=r"columns.energy must say which column is the energy.* has 2: x, y"):
        read(study_in(tmp_path, ["a"]))


def test_sums_that_overflow_are_refused(tmp_path):
    (tmp_path / "a").write_text("1 1\n1e308 1e308\n")
    with pytest.raises(DataFileError, match=r"row 2: the sum of columns .* must stay finite"):
        read(study_in(tmp_path, ["a"], "[columns]\nenergy = [1, 2]"))


def test_ledger_with_a_lost_row_is_not_balanced():
    assert FileLedger("x", rows_read=10, kept=4, transient=3, replaced=2, dropped=1).balanced
    assert not FileLedger("x", rows_read=10, kept=9).balanced


@pytest.fixture
def table(tmp_path):
    (tmp_path / "a").write_text("t E[eV] E[kJ/mol] m(1) t\n1 2 3 4 5\n")
    return open_table(tmp_path / "a", Format())


@pytest.mark.parametrize(
    ("wanted", "positions"),
    [((1,), (0,)), ((5,), (4,)), (("E[eV]",), (1,)), (("m",), (3,)), (("m(1)", 2), (3, 1))],
)
def test_columns_are_named_with_or_without_unit_or_counted(table, wanted, positions):
    assert resolve_columns(table, wanted, "columns.energy") == positions


@pytest.mark.parametrize(
    ("wanted", "message"),
    [
        (6, "columns.energy must be one of the 5 columns; got 6. Columns are 1: 't', 2: "),
        ("n", "columns.energy must be a column of the file; got 'n'.* Columns are 1: 't', 2: 'E"),
        ("E[eV", "Did you mean 'E\\[eV\\]'"),
        ("t", "must name one column; got 't', the name of columns 1, 5. Use a position"),
        ("E", "must name one column; got 'E', the name of columns 2, 3"),
    ],
)
def test_columns_that_are_missing_or_ambiguous_are_refused(table, wanted, message):
    with pytest.raises(DataFileError, match=message):
        resolve_columns(table, (wanted,), "columns.energy")


def test_what_is_no_plain_file_is_refused(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    for path, message in (
        (tmp_path, "must be in a plain file; got a folder"),
        (tmp_path / "pipe", "must be in a plain file; got a pipe or a device"),
        (tmp_path / "missing", "must be readable; the system says: No such file"),
        (tmp_path / "nul\0", "must be readable; the system says: embedded null"),
    ):
        with pytest.raises(DataFileError, match=message):
            open_table(path, Format())
