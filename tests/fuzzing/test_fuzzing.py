"""A short version of the fuzzing script, the same files every time."""

from __future__ import annotations

import itertools

import pytest
from fuzzing.fuzz_readers import refuse_misreading, refuse_misreading_of_a_part
from fuzzing.grammar import documents, netcdf, sound_documents
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from reweight.errors import DataFileError
from reweight.reading import FileLedger, open_table
from reweight.study import Format


@pytest.fixture
def names(tmp_path):
    """New names without end: HDF5 confuses damaged files of one name."""
    return (tmp_path / f"{number}.dat" for number in itertools.count())


short = settings(
    max_examples=150,
    derandomize=True,
    database=None,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)


@short
@given(document=documents())
def test_whatever_a_file_holds_it_gives_data_or_our_own_error(names, document):
    refuse_misreading(next(names), document)


@short
@given(document=sound_documents(), share=st.floats(0.0, 1.0))
def test_a_sound_file_gives_its_numbers_and_a_part_of_it_the_first_ones_or_an_error(names, document, share):
    refuse_misreading_of_a_part(next(names), document, int(share * len(document.content)))


# Found by the script.
@pytest.mark.parametrize(
    ("form", "old", "new", "message"),
    [
        ("NETCDF3_64BIT_OFFSET", b"energy", b"ene\xb5gy", "must be a complete NetCDF file"),
        (
            "NETCDF3_64BIT_DATA",
            b"\x06energy",
            b"\xff\xff\xff\xff\xff\xff\xff\x06energy",
            "as long as its header",
        ),
        ("NETCDF3_64BIT_DATA", b"\0" * 7 + b"\x06energy", b"\xff" * 8 + b"energy", "as long as its header"),
    ],
)
def test_a_damaged_name_in_a_netcdf_file_is_refused(tmp_path, form, old, new, message):
    sound = netcdf(form, unlimited=False, packed=False)
    assert old in sound
    path = tmp_path / "data.nc"
    path.write_bytes(sound.replace(old, new))
    with pytest.raises(DataFileError, match=message):
        list(open_table(path, Format()).chunks([0], FileLedger("data.nc")))


def test_a_file_in_the_place_of_a_damaged_one_is_not_read_as_zeros(tmp_path):
    sound = netcdf("NETCDF4", unlimited=True, packed=True)
    path = tmp_path / "data.nc"
    for content, message in ((sound[:-500], "complete NetCDF file"), (sound, "Start the program again")):
        path.write_bytes(content)
        with pytest.raises(DataFileError, match=message):
            open_table(path, Format())
