"""The step between rows from a column of times, in text and NetCDF, and what no clock can be made of."""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
import pytest

import reweight as rw
from reweight.clock import Clock
from reweight.errors import DataFileError, InputError
from reweight.reading import Timekeeper, run_chunks
from reweight.study import Study, parse_study

HERE = Path("run.dat")


def clock_of(*chunks: np.ndarray, unit: str | None = "ps") -> Clock | None:
    keeper = Timekeeper()
    row = 1
    for chunk in chunks:
        keeper.add(chunk, HERE, row)
        row += len(chunk)
    return keeper.clock(unit)


@pytest.mark.parametrize("size", [1, 2, 7, 1000])
@pytest.mark.parametrize("digits", [1, 2, 6])
def test_rounded_times_give_the_step(size: int, digits: int) -> None:
    """A third of a ps printed with one to six digits."""
    times = np.round(5 + np.arange(1000) / 3, digits)
    clock = clock_of(*(times[start : start + size] for start in range(0, 1000, size)))

    assert clock is not None
    assert clock.unit == "ps"
    assert clock.step == pytest.approx(1 / 3, abs=2 * 10.0**-digits / 999)


@pytest.mark.parametrize("size", [1, 10, 64, 100])
@pytest.mark.parametrize(
    ("change", "found"),
    [
        (lambda t: t.__setitem__(50, t[49]), "rise from row to row; got 49 after 49"),
        (lambda t: t.__setitem__(slice(50, None), t[50:] - 20), "rise from row to row; got 30 after 49"),
        (lambda t: t.__setitem__(slice(50, None), t[50:] + 1), "rise in equal steps; got 51 after 49"),
    ],
)
def test_times_that_do_not_rise_evenly_are_refused_with_their_row(size: int, change, found: str) -> None:
    times = np.arange(100.0)
    change(times)

    with pytest.raises(
        DataFileError, match=rf"run\.dat, row 51: times must {found} .*written twice"
    ) as refused:
        clock_of(*(times[start : start + size] for start in range(0, 100, size)))

    assert refused.value.line == 51


@pytest.mark.parametrize("size", [50, 700, 5000])
def test_another_interval_is_refused(size: int) -> None:
    times = np.concatenate([np.arange(1000.0), 1000 + 1.3 * np.arange(1000)])

    with pytest.raises(DataFileError, match="must rise in equal steps"):
        clock_of(*(times[start : start + size] for start in range(0, 2000, size)))


def test_one_row_or_no_unit_make_no_clock() -> None:
    assert clock_of(np.array([3.0])) is None
    assert clock_of(np.arange(5.0), unit=None) is None


def study_in(folder: Path, files: list[str], discard: str = '"auto"') -> Study:
    return parse_study(
        'schema = 1\nenergy_unit = "kJ/mol"\n[columns]\nenergy = "E"\ntime = "t"\ntime_unit = "ps"\n'
        f'[[run]]\nname = "r"\ntemperature = 300\nfiles = {files}\ndiscard = {discard}\n',
        folder=folder,
    )


def energies(count: int = 3000) -> np.ndarray:
    return np.random.default_rng(1).normal(-50, 3, count)


def write_text(path: Path, times: np.ndarray, values: np.ndarray) -> None:
    np.savetxt(path, np.column_stack([times, values]), fmt=["%.3f", "%.6f"], header="t E")


def write_netcdf(path: Path, times: np.ndarray, values: np.ndarray) -> None:
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", times.size)
        dataset.createVariable("t", "f8", ("sample",))[:] = times
        dataset.createVariable("E", "f8", ("sample",))[:] = values


@pytest.mark.parametrize("write", [write_text, write_netcdf])
def test_a_study_with_a_clock_knows_its_step_and_reads_the_same_energies(write, tmp_path: Path) -> None:
    values = energies()
    write(tmp_path / "a", 0.25 * np.arange(1800), values[:1800])
    write(tmp_path / "b", 0.25 * np.arange(1800, 3000), values[1800:])
    study = study_in(tmp_path, ["a", "b"], '"0.1 ns"')

    combined = rw.combine(study)

    (run,) = combined.runs
    assert run.clock == Clock(step=pytest.approx(0.25), unit="ps")
    assert run.decision.transient == 400  # 100 ps
    rows = np.concatenate(list(run_chunks(study, study.runs[0], [])))
    np.testing.assert_allclose(rows, values[:, None], atol=1e-6)
    rw.save(combined, tmp_path / "c.nc")
    assert rw.open_combined(tmp_path / "c.nc").runs[0].clock == run.clock


@pytest.mark.parametrize("write", [write_text, write_netcdf])
def test_a_gap_between_files_is_refused_at_the_first_row_of_the_second(write, tmp_path: Path) -> None:
    values = energies(200)
    write(tmp_path / "a", np.arange(100.0), values[:100])
    write(tmp_path / "b", np.arange(110.0, 210.0), values[100:])

    with pytest.raises(DataFileError, match=r"b, row 1: times must rise in equal steps; got 110 after 99"):
        rw.combine(study_in(tmp_path, ["a", "b"]))


def test_runs_read_into_memory_keep_their_clock(tmp_path: Path) -> None:
    write_text(tmp_path / "a", 0.5 * np.arange(3000), energies())

    tree = rw.read_runs(study_in(tmp_path, ["a"]))

    assert (tree["r"].attrs["time_step"], tree["r"].attrs["time_unit"]) == (0.5, "ps")
    assert rw.combine(tree, discard="100 ps").runs[0].decision.transient == 200


@pytest.mark.parametrize(
    ("amount", "unit", "rows"), [(20.0, "ns", 200_000), (0.3, "ps", 3), (0.31, "ps", 4), (0.0, "fs", 0)]
)
def test_a_time_is_so_many_rows_rounded_up(amount: float, unit: str, rows: int) -> None:
    assert Clock(step=0.1, unit="ps").rows(amount, unit) == rows


def test_counted_and_measured_time_do_not_mix() -> None:
    assert Clock(step=10, unit="sweep").rows(500, "sweep") == 50
    with pytest.raises(InputError, match="a time in 'ns' must be convertible to 'sweep'"):
        Clock(step=10, unit="sweep").rows(1, "ns")
    with pytest.raises(InputError, match="must be a time, or one of step, sweep, reduced; got 'kJ'"):
        Clock(step=10, unit="ps").rows(1, "kJ")
