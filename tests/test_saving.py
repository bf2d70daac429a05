"""The combined file: nothing is lost on the way through it, and what is no such file is refused by name.

That answers after opening have the same bits is shown in tests/test_same_bits.py; here are the labels beside the
numbers, and broken or hostile files.
"""

from __future__ import annotations

import dataclasses
import os
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr

import reweight as rw
from reweight.errors import CombinedFileError, OutputError
from reweight.saving import SCHEMA_VERSION

NAMES = ("cold run", "heiß \N{DIVISION SLASH} ü", "run.3 #%\N{GREEK SMALL LETTER ALPHA}")


def make(seed: int = 1, **keys: object) -> rw.DensityOfStates:
    rng = np.random.default_rng(seed)
    temperatures = [300.0, 330.0, 360.0]
    runs = {
        name: {"energy": 0.0083 * rng.gamma(40.0, t, 800), "order parameter": rng.standard_normal(800)}
        for name, t in zip(NAMES, temperatures, strict=True)
    }
    return rw.combine(
        runs,
        temperatures=temperatures,
        energy_unit="kJ/mol",
        temperature_unit="K",
        count=7,
        per="molecule",
        title='Größe – a title with signs: "quoted", {braces}, \N{SNOWMAN}',
        **keys,
    )


@pytest.fixture
def saved(tmp_path: Path) -> Path:
    rw.save(make(), tmp_path / "study.nc")
    return tmp_path / "study.nc"


def test_everything_beside_the_numbers_comes_back(saved: Path) -> None:
    before, after = make(), rw.open_combined(saved)

    assert after.description == before.description
    assert after.provenance == before.provenance
    assert after.study_text == before.study_text
    assert [run.name for run in after.runs] == list(NAMES)
    for one, other in zip(before.runs, after.runs, strict=True):
        assert dataclasses.asdict(other.decision) == dataclasses.asdict(one.decision)
        assert (other.rows, other.samples, other.beta, other.files) == (
            one.rows,
            one.samples,
            one.beta,
            one.files,
        )
        assert other.tally.columns == one.tally.columns
    asked = {"temperature": [310.0, 345.0], "per_count": True}
    xr.testing.assert_identical(rw.curve(before, **asked), rw.curve(after, **asked))


def test_equal_inputs_give_equal_files(tmp_path: Path) -> None:
    rw.save(make(), tmp_path / "one.nc")
    rw.save(make(), tmp_path / "two.nc")
    rw.save(make(seed=2), tmp_path / "other.nc")

    one, two, other = ((tmp_path / name).read_bytes() for name in ("one.nc", "two.nc", "other.nc"))
    assert one == two
    assert one != other  # else the line above proves nothing


def test_an_opened_file_is_saved_again_with_the_same_bytes(saved: Path, tmp_path: Path) -> None:
    rw.save(rw.open_combined(saved), tmp_path / "again.nc")

    assert (tmp_path / "again.nc").read_bytes() == saved.read_bytes()


@pytest.mark.parametrize("name", ["with blank.nc", "größe \N{SNOWMAN}.nc", "no ending"])
def test_file_names_may_hold_blanks_and_any_letters(name: str, tmp_path: Path) -> None:
    rw.save(make(), tmp_path / name)

    assert rw.open_combined(tmp_path / name).description == make().description
    assert os.listdir(tmp_path) == [name]


def test_a_file_is_replaced_only_when_asked(saved: Path) -> None:
    before = saved.read_bytes()
    with pytest.raises(OutputError, match="must be a new name"):
        rw.save(make(seed=2), saved)
    assert saved.read_bytes() == before

    rw.save(make(seed=2), saved, force=True)
    assert saved.read_bytes() != before


def test_an_input_is_never_replaced(saved: Path) -> None:
    with pytest.raises(OutputError, match="must not replace an input"):
        rw.save(make(), saved, force=True, inputs=[saved])


def test_a_missing_file_is_refused_with_the_command_that_makes_one(tmp_path: Path) -> None:
    with pytest.raises(CombinedFileError, match=r"must exist; got .*missing\.nc.*reweight combine"):
        rw.open_combined(tmp_path / "missing.nc")
    with pytest.raises(CombinedFileError, match="not a file"):
        rw.open_combined(tmp_path)


@pytest.mark.parametrize("content", [b"", b"schema = 1\n", b"\x89HDF\r\n\x1a\n", b"CDF\x01" + bytes(40)])
def test_what_is_no_netcdf_file_is_refused(content: bytes, tmp_path: Path) -> None:
    (tmp_path / "odd.nc").write_bytes(content)

    with pytest.raises(CombinedFileError, match="must be a combined file written by reweight"):
        rw.open_combined(tmp_path / "odd.nc")


def test_another_kind_of_netcdf_file_is_refused(tmp_path: Path) -> None:
    xr.Dataset({"energy": ("sample", np.arange(3.0))}).to_netcdf(tmp_path / "raw.nc", engine="netcdf4")

    with pytest.raises(CombinedFileError, match="another kind of NetCDF file"):
        rw.open_combined(tmp_path / "raw.nc")


def test_a_file_of_a_newer_schema_is_refused(saved: Path) -> None:
    with netCDF4.Dataset(saved, "a") as file:
        file.schema_version = np.int32(SCHEMA_VERSION + 1)

    with pytest.raises(
        CombinedFileError,
        match=rf"schema version {SCHEMA_VERSION + 1}; this program reads up to {SCHEMA_VERSION}\. Update",
    ):
        rw.open_combined(saved)


@pytest.mark.parametrize("version", [None, "one", np.float64(np.nan)])
def test_a_file_without_a_usable_schema_version_is_refused(version: object, saved: Path) -> None:
    with netCDF4.Dataset(saved, "a") as file:
        file.delncattr("schema_version")
        if version is not None:
            file.schema_version = version

    with pytest.raises(CombinedFileError, match="must be an undamaged combined file"):
        rw.open_combined(saved)


@pytest.mark.parametrize("part", np.linspace(0.01, 0.99, 12))
def test_a_truncated_file_is_refused_and_nothing_crashes(part: float, saved: Path) -> None:
    whole = saved.read_bytes()
    saved.write_bytes(whole[: int(part * len(whole))])

    with pytest.raises(CombinedFileError, match=r"must be an? (undamaged )?combined file"):
        rw.open_combined(saved)


def test_damaged_bytes_are_refused_or_change_nothing(saved: Path) -> None:
    """Flipped bytes in the numbers themselves cannot all be seen; whatever is raised must be ours."""
    whole = saved.read_bytes()
    refused = 0
    for place in np.random.default_rng(1).integers(0, len(whole), 60):
        saved.write_bytes(whole[:place] + bytes([whole[place] ^ 0xFF]) + whole[place + 1 :])
        try:
            rw.open_combined(saved)
        except CombinedFileError:
            refused += 1
    assert refused > 0


@pytest.mark.parametrize(
    ("attribute", "value"),
    [
        *((attribute, None) for attribute in ("description", "left_out", "provenance", "solver", "study")),
        *((attribute, "no JSON {") for attribute in ("description", "left_out", "provenance", "solver")),
        *((attribute, "[1, 2]") for attribute in ("description", "left_out", "solver")),
        *((attribute, "{}") for attribute in ("description", "solver")),
        ("description", np.int32(3)),
    ],
)
def test_a_part_that_is_missing_or_odd_is_refused(attribute: str, value: object, saved: Path) -> None:
    with netCDF4.Dataset(saved, "a") as file:
        file.delncattr(attribute)
        if value is not None:
            file.setncattr(attribute, value)

    with pytest.raises(CombinedFileError, match="must be an undamaged combined file"):
        rw.open_combined(saved)


@pytest.mark.parametrize("part", ["kept_rows", "keys", "leaf_rows"])
def test_a_run_without_its_numbers_is_refused(part: str, tmp_path: Path) -> None:
    rng = np.random.default_rng(1)
    energies = rng.integers(0, 9, 70_000).astype(float)
    rw.save(rw.combine({"a": energies}, temperatures=[3.0]), tmp_path / "study.nc")
    with netCDF4.Dataset(tmp_path / "study.nc", "a") as file:
        file.groups["run_0000"].renameVariable(part, "lost")

    with pytest.raises(CombinedFileError, match=f"must be an undamaged combined file.*{part}"):
        rw.open_combined(tmp_path / "study.nc")


def test_a_small_file_that_declares_giant_arrays_is_refused_before_they_are_made(tmp_path: Path) -> None:
    path = tmp_path / "bomb.nc"
    rw.save(make(), tmp_path / "good.nc")
    with netCDF4.Dataset(path, "w") as file, netCDF4.Dataset(tmp_path / "good.nc") as good:
        file.setncatts({name: good.getncattr(name) for name in good.ncattrs()})
        file.createDimension("run", 10**12)
        file.createVariable("free_energy", "f8", ("run",), zlib=True, chunksizes=(1024,))
    assert path.stat().st_size < 100_000

    with pytest.raises(CombinedFileError, match="more than a file of this size can hold"):
        rw.open_combined(path)
