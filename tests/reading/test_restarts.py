"""Runs in several parts: a restart that overlaps, headers written again, and what is not recognised as a restart."""

from __future__ import annotations

import gzip
from pathlib import Path

import netCDF4
import numpy as np
import pytest

import reweight as rw
from reweight.errors import DataFileError
from reweight.reading import FileLedger, run_chunks
from reweight.reading.text import TextTable
from reweight.study import Format, Study, parse_study

CLOCK = 'time = "t"\ntime_unit = "ps"\n'


def study_of(folder: Path, files: list[str], clock: str = CLOCK, extra: str = "") -> Study:
    return parse_study(
        f'schema = 1\nenergy_unit = "kJ/mol"\n[columns]\nenergy = "E"\n{clock}{extra}'
        f'[[run]]\nname = "r"\ntemperature = 300\nfiles = {files}\n',
        folder=folder,
    )


def read(study: Study) -> tuple[np.ndarray, list[FileLedger]]:
    ledgers: list[FileLedger] = []
    rows = np.concatenate(list(run_chunks(study, study.runs[0], ledgers)))
    assert all(ledger.balanced for ledger in ledgers)
    return rows[:, 0], ledgers


def text(times: range, offset: float, header: str = "# t E\n") -> str:
    """Rows whose energy says which part wrote them."""
    return header + "".join(f"{t} {t + offset}\n" for t in times)


def write_netcdf(path: Path, times: range, offset: float) -> None:
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", len(times))
        dataset.createVariable("t", "f8", ("sample",))[:] = np.array(times)
        dataset.createVariable("E", "f8", ("sample",))[:] = np.array(times) + offset


def test_rows_that_a_later_file_wrote_again_are_replaced_and_counted(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(100), 0.0))
    (tmp_path / "b").write_bytes(gzip.compress(text(range(80, 150), 0.25).encode()))
    write_netcdf(tmp_path / "c", range(149, 200), 0.5)

    energies, ledgers = read(study_of(tmp_path, ["a", "b", "c"]))

    expected = np.arange(200) + np.repeat([0.0, 0.25, 0.5], [80, 69, 51])
    np.testing.assert_array_equal(energies, expected)
    assert [(each.rows_read, each.kept, each.replaced) for each in ledgers] == [
        (100, 80, 20),
        (70, 69, 1),
        (51, 51, 0),
    ]
    assert (ledgers[0].first_energy, ledgers[0].last_energy) == (0, 99)


def test_a_restart_that_is_itself_overtaken_by_the_next_loses_its_end(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(100), 0.0))
    (tmp_path / "b").write_text(text(range(60, 70), 0.25))
    (tmp_path / "c").write_text(text(range(65, 90), 0.5))

    energies, ledgers = read(study_of(tmp_path, ["a", "b", "c"]))

    np.testing.assert_array_equal(energies, np.arange(90) + np.repeat([0.0, 0.25, 0.5], [60, 5, 25]))
    assert [each.replaced for each in ledgers] == [40, 5, 0]


@pytest.mark.parametrize("header", ["# t E\n", "t E\n", "  t   E \n", "#t,E\n", "t,E\r\n"])
@pytest.mark.parametrize("block_size", [16, 100, 1 << 20])
def test_a_header_inside_a_file_begins_a_restart(tmp_path: Path, header: str, block_size: int) -> None:
    separator = "," if "," in header else " "
    end = "\r\n" if "\r" in header else "\n"
    parts = [(range(50), 0.0), (range(30, 60), 0.25), (range(60, 70), 0.5)]
    content = "".join(
        header + "".join(f"{t}{separator}{t + offset}{end}" for t in times) for times, offset in parts
    )
    (tmp_path / "a").write_bytes(content.encode())

    energies, (ledger,) = read(study_of(tmp_path, ["a"]))
    table = TextTable(tmp_path / "a", Format(), block_size=block_size)

    np.testing.assert_array_equal(energies, np.arange(70) + np.repeat([0.0, 0.25, 0.5], [30, 30, 10]))
    assert (ledger.rows_read, ledger.replaced, ledger.repeated_headers) == (90, 20, 2)
    assert table.section_starts(0) == [0, 30, 60]
    again = FileLedger("a")
    assert sum(map(len, table.chunks([0, 1], again))) == 90
    assert again.repeated_headers == 2


def test_without_a_clock_headers_are_counted_and_all_rows_stay(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(5), 0.0) + text(range(3, 8), 0.25))

    energies, (ledger,) = read(study_of(tmp_path, ["a"], clock=""))

    assert len(energies) == 10
    assert (ledger.replaced, ledger.repeated_headers) == (0, 1)


def test_headers_without_rows_replace_nothing(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(
        "t E\n" + text(range(5), 0.0, "t E\n\nt E\n") + text(range(4, 8), 0.25, "t E\n")
    )

    energies, (ledger,) = read(study_of(tmp_path, ["a"]))

    np.testing.assert_array_equal(energies, [0, 1, 2, 3, 4.25, 5.25, 6.25, 7.25])
    assert ledger.replaced == 1


def test_a_step_back_without_a_header_is_no_restart(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(50), 0.0) + text(range(30, 60), 0.25, header=""))

    with pytest.raises(DataFileError, match=r"row 51: times must rise from row to row; got 30 after 49"):
        read(study_of(tmp_path, ["a"]))


def test_files_in_the_wrong_order_are_refused(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(100), 0.0))
    (tmp_path / "b").write_text(text(range(80, 150), 0.25))

    with pytest.raises(DataFileError, match=r"b: files of a run must be in time order.* all its 70 rows"):
        read(study_of(tmp_path, ["b", "a"]))


def test_a_wild_time_does_not_make_rows_disappear(tmp_path: Path) -> None:
    rows = [f"{t} {t}\n" for t in range(100)]
    rows[50] = "999999 50\n"
    (tmp_path / "a").write_text("t E\n" + "".join(rows))
    (tmp_path / "b").write_text(text(range(90, 150), 0.25))

    with pytest.raises(
        DataFileError, match=r"a, row 52: times must rise from row to row; got 51 after 999999"
    ):
        read(study_of(tmp_path, ["a", "b"]))


def test_a_restart_off_the_grid_of_times_is_refused(tmp_path: Path) -> None:
    (tmp_path / "a").write_text(text(range(100), 0.0))
    (tmp_path / "b").write_text("t E\n" + "".join(f"{t + 0.4} {t}\n" for t in range(80, 150)))

    with pytest.raises(DataFileError, match=r"b, row 1: times must rise in equal steps; got 80.4 after 80"):
        read(study_of(tmp_path, ["a", "b"]))


def test_a_restart_has_the_same_bits_as_the_run_written_in_one_piece(tmp_path: Path) -> None:
    rng = np.random.default_rng(5)
    energies = rng.normal(-50, 3, 4000)
    other = rng.normal(-50, 3, 4000)

    def write(name: str, first: int, last: int, values: np.ndarray) -> None:
        table = np.column_stack([np.arange(first, last), values[first:last]])
        np.savetxt(tmp_path / name, table, fmt=["%d", "%.17g"], header="t E")

    write("whole", 0, 4000, energies)
    write("a", 0, 2500, np.concatenate([energies[:2000], other[2000:]]))
    write("b", 2000, 4000, energies)

    one = rw.combine(study_of(tmp_path, ["whole"]))
    two = rw.combine(study_of(tmp_path, ["a", "b"]))

    np.testing.assert_array_equal(one.runs[0].tally.tail, two.runs[0].tally.tail)
    assert one.runs[0].clock == two.runs[0].clock
    assert [entry["replaced"] for entry in two.runs[0].files] == [500, 0]
    assert sum(entry["kept"] + entry["transient"] for entry in two.runs[0].files) == 4000
