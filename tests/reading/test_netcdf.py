"""NetCDF files: columns, and files that promise more than they hold."""

import netCDF4
import numpy as np
import pytest

from reweight.errors import DataFileError
from reweight.reading import FileLedger, open_table
from reweight.reading.classic import is_complete
from reweight.study import Format

CLASSIC = ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA"]
FORMATS = ["NETCDF4", *CLASSIC]
ROWS = 70_000  # more than one slice


def write(path, form, *, unlimited=False, types=("f8", "i4")):
    with netCDF4.Dataset(path, "w", format=form) as dataset:
        dataset.title = "seven c"
        dataset.createDimension("sample", None if unlimited else ROWS)
        dataset.createDimension("three", 3)
        for place, kind in enumerate(types):
            variable = dataset.createVariable(f"v{place}", kind, ("sample",))
            variable.units = "K"
            variable[:] = np.arange(ROWS) % 101 + place
        dataset.createVariable("letters", "S1", ("three",))
        dataset.createVariable("matrix", "f8", ("three", "sample" if not unlimited else "three"))
        dataset.createVariable("short", "f8", ("three",))[:] = 0.0


def numbers(path, columns, ledger=None):
    return np.concatenate(list(open_table(path, Format()).chunks(columns, ledger or FileLedger("x"))))


@pytest.mark.parametrize("form", FORMATS)
@pytest.mark.parametrize("unlimited", [False, True])
def test_numeric_variables_with_one_dimension_are_columns(tmp_path, form, unlimited):
    path = tmp_path / "named as it likes.dat"
    write(path, form, unlimited=unlimited)
    assert open_table(path, Format()).names == ("v0", "v1", "short")
    ledger = FileLedger("x")
    values = numbers(path, [1, 0], ledger)
    np.testing.assert_array_equal(values, np.column_stack([np.arange(ROWS) % 101 + 1, np.arange(ROWS) % 101]))
    assert (ledger.rows_read, ledger.size, len(ledger.sha256)) == (ROWS, path.stat().st_size, 64)


def test_variables_in_groups_are_named_with_their_path(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 3)
        dataset.createVariable("/run/energies/potential", "f8", ("sample",))[:] = [1, 2, 3]
    assert open_table(path, Format()).names == ("run/energies/potential",)
    np.testing.assert_array_equal(numbers(path, [0]), [[1], [2], [3]])


def test_scaled_values_are_unpacked(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 2)
        variable = dataset.createVariable("E", "i2", ("sample",))
        variable.scale_factor = 0.5
        variable[:] = [1.5, 2.0]
    np.testing.assert_array_equal(numbers(path, [0]), [[1.5], [2.0]])


def test_columns_of_different_length_are_refused(tmp_path):
    write(tmp_path / "data.nc", "NETCDF4")
    with pytest.raises(
        DataFileError, match=r"must share one dimension; got v0\(sample = 70000\), short\(three = 3\)"
    ):
        numbers(tmp_path / "data.nc", [0, 2])


@pytest.mark.parametrize(
    ("bad", "found"), [(np.nan, "nan"), (-np.inf, "-inf"), (np.ma.masked, "a missing value")]
)
def test_numbers_that_are_none_are_refused_with_their_index(tmp_path, bad, found):
    path = tmp_path / "data.nc"
    write(path, "NETCDF4")
    with netCDF4.Dataset(path, "a") as dataset:
        dataset["v0"][66_000] = bad
    message = rf"row 66001: variable 'v0' must hold finite numbers; got {found} \(index 66000"
    with pytest.raises(DataFileError, match=message):
        numbers(path, [0])


def test_file_without_columns_or_rows_is_refused(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", None)
    with pytest.raises(DataFileError, match="must hold a numeric variable with one dimension"):
        open_table(path, Format())
    with netCDF4.Dataset(path, "a") as dataset:
        dataset.createVariable("E", "f8", ("sample",))
    with pytest.raises(DataFileError, match="'E' has none"):
        numbers(path, [0])


@pytest.mark.parametrize("form", CLASSIC)
@pytest.mark.parametrize("unlimited", [False, True])
@pytest.mark.parametrize("types", [("f8",), ("i2",), ("f8", "i2"), ("i2", "f4", "i2")])
def test_classic_file_is_complete_up_to_its_last_byte(tmp_path, form, unlimited, types):
    path = tmp_path / "data.nc"
    write(path, form, unlimited=unlimited, types=types)
    raw = path.read_bytes()
    assert is_complete(path)
    for missing in (8, 1000, len(raw) // 2, len(raw) - 100, len(raw) - 5):  # at most 3 bytes are padding
        path.write_bytes(raw[:-missing])
        assert not is_complete(path)
        with pytest.raises(DataFileError, match="must be as long as its header says"):
            open_table(path, Format())


def test_cut_off_hdf5_file_is_refused(tmp_path):
    path = tmp_path / "data.nc"
    write(path, "NETCDF4")
    path.write_bytes(path.read_bytes()[:-100])
    with pytest.raises(DataFileError, match="must be a complete NetCDF file"):
        open_table(path, Format())


def test_small_file_that_declares_terabytes_is_refused(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 10**12)
        dataset.createVariable("E", "f8", ("sample",), chunksizes=(1000,), fill_value=False)[5] = 1.0
    assert path.stat().st_size < 100_000
    with pytest.raises(DataFileError, match="must fit the file; it declares 8000000000000 bytes"):
        numbers(path, [0])


def test_huge_storage_chunks_are_refused_before_they_are_allocated(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 10**8)
        dataset.createVariable("E", "f8", ("sample",), chunksizes=(10**8,))
    with pytest.raises(DataFileError, match="must be stored in chunks of at most 256 MiB"):
        numbers(path, [0])


def test_caps_may_be_raised_by_the_study(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 10**5)
        dataset.createVariable("E", "f8", ("sample",), chunksizes=(10**5,), zlib=True)[:] = 1.0
        dataset.createVariable("m", "f8", ("sample",))[:] = 1.0
    for cap, message in (
        ({"largest_chunk": 10_000}, "at most 0.0095.* MiB; got 100000 rows a chunk.*raise largest_chunk"),
        ({"most_columns": 1}, "at most 1 numeric variables with one dimension; got 2.*raise most_columns"),
    ):
        with pytest.raises(DataFileError, match=message):
            list(open_table(path, Format(**cap)).chunks([0], FileLedger("x")))
    assert numbers(path, [0]).shape == (10**5, 1)


def test_the_expansion_of_a_netcdf_file_may_be_capped_and_the_cap_raised(tmp_path):
    path = tmp_path / "data.nc"
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", 10**6)
        dataset.createVariable("E", "f8", ("sample",), chunksizes=(10**6,), zlib=True)[:] = 1.0
    with pytest.raises(DataFileError, match=r"must fit the file.*raise largest_expansion"):
        list(open_table(path, Format(largest_expansion=10)).chunks([0], FileLedger("x")))
    assert sum(
        len(rows) for rows in open_table(path, Format(largest_expansion=2000)).chunks([0], FileLedger("x"))
    )
