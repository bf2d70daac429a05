"""Rows sorted by a column of temperatures: the same runs, to the bit, as from files written for each temperature."""

from __future__ import annotations

import dataclasses
import errno
import json
from itertools import pairwise
from pathlib import Path

import netCDF4
import numpy as np
import pytest

import reweight as rw
from reweight.errors import DataFileError
from reweight.reading import regrouped
from reweight.reading.spool import Spool
from reweight.study import Study, parse_study

TEMPERATURES = np.array([1.0, 1.125, 1.25, 1.40625])
ROWS = 70_000  # more than the 65,536 from which on a run is kept as sums over stretches

HEAD = 'schema = 1\nenergy_unit = "reduced"\n[columns]\nenergy = "E"\ntime = "t"\ntime_unit = "sweep"\n'
OBSERVABLE = '[observables.m]\ncolumn = "m"\n'


def exchange(rows: int, seed: int = 7) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Energies and observables at every temperature, shape (rows, K), and which replica is there.

    Energies of an ideal system with Gamma-distributed energies; neighbours are exchanged at random, which does not change
    the distribution at any temperature.
    """
    rng = np.random.default_rng(seed)
    count = TEMPERATURES.size
    energies = np.round(rng.gamma(40.0, TEMPERATURES, (rows, count)), 6)
    observables = np.round(rng.standard_normal((rows, count)), 6)
    replicas = np.empty((rows, count), dtype=int)
    now = np.arange(count)
    swaps = rng.integers(0, count, rows)
    for row in range(rows):
        if swaps[row] < count - 1:
            now[[swaps[row], swaps[row] + 1]] = now[[swaps[row] + 1, swaps[row]]]
        replicas[row] = now
    return energies, observables, replicas


def table(
    times: np.ndarray, temperatures: np.ndarray, energies: np.ndarray, observables: np.ndarray
) -> np.ndarray:
    return np.column_stack([times, temperatures, energies, observables])


def write(path: Path, rows: np.ndarray) -> None:
    lines = "\n".join(" ".join(map(repr, row)) for row in rows.tolist())
    path.write_text(f"# t T E m\n{lines}\n")


def write_netcdf(path: Path, rows: np.ndarray) -> None:
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("sample", len(rows))
        for name, column in zip("tTEm", rows.T, strict=True):
            dataset.createVariable(name, "f8", ("sample",))[:] = column


def replica_tables(rows: int, seed: int = 7) -> list[np.ndarray]:
    energies, observables, replicas = exchange(rows, seed)
    times = 10 * np.arange(rows)
    tables = []
    for replica in range(TEMPERATURES.size):
        place = np.argmax(replicas == replica, axis=1)
        at = np.arange(rows)
        tables.append(table(times, TEMPERATURES[place], energies[at, place], observables[at, place]))
    return tables


def sorted_tables(rows: int, seed: int = 7) -> list[np.ndarray]:
    energies, observables, _ = exchange(rows, seed)
    times = 10 * np.arange(rows)
    return [
        table(times, np.full(rows, t), energies[:, place], observables[:, place])
        for place, t in enumerate(TEMPERATURES)
    ]


def replica_study(folder: Path, files: list[list[str]], head: str = HEAD, extra: str = "") -> Study:
    replicas = "".join(f"[[replica]]\nfiles = {each}\n{extra}" for each in files)
    head = head.replace('energy = "E"\n', 'energy = "E"\ntemperature = "T"\n')
    return parse_study(f"{head}{OBSERVABLE}{replicas}", folder=folder)


def sorted_study(
    folder: Path, files: list[str], exchange: bool = True, names: list[str] | None = None
) -> Study:
    runs = "".join(
        f'[[run]]\nname = "{name}"\ntemperature = {t}\nfiles = ["{file}"]\n'
        for file, t, name in zip(files, TEMPERATURES, names or files, strict=True)
    )
    conditions = f"[conditions]\nexchange = {str(exchange).lower()}\n"
    return parse_study(f"{HEAD}{OBSERVABLE}{conditions}{runs}", folder=folder)


def assert_same_tallies(one: rw.DensityOfStates, two: rw.DensityOfStates) -> None:
    """Every number of every run's tally, the free energies and a curve are equal to the bit."""
    for left, right in zip(one.runs, two.runs, strict=True):
        assert left.beta == right.beta
        assert left.rows == right.rows
        assert left.tally.nodes == right.tally.nodes
        np.testing.assert_array_equal(left.tally.tail, right.tally.tail)
        assert (left.tally.leaves is None) == (right.tally.leaves is None)
        if left.tally.leaves is not None and right.tally.leaves is not None:
            np.testing.assert_array_equal(left.tally.leaves.keys, right.tally.leaves.keys)
            np.testing.assert_array_equal(left.tally.leaves.sums, right.tally.leaves.sums)
            np.testing.assert_array_equal(left.tally.leaves.rows, right.tally.leaves.rows)
        assert left.clock == right.clock
        assert dataclasses.asdict(left.decision) == dataclasses.asdict(right.decision)
    np.testing.assert_array_equal(one.estimate.solution.free_energies, two.estimate.solution.free_energies)
    at = [1.1, 1.3]
    np.testing.assert_array_equal(rw.curve(one, at).heat_capacity, rw.curve(two, at).heat_capacity)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("exchange")
    for place, rows in enumerate(replica_tables(ROWS)):
        if place == 1:
            write_netcdf(made / f"replica{place}", rows)
        else:
            write(made / f"replica{place}", rows)
    for place, rows in enumerate(sorted_tables(ROWS)):
        write(made / f"sorted{place}", rows)
    return made


@pytest.fixture(scope="module")
def from_replicas(folder: Path) -> rw.DensityOfStates:
    return rw.combine(replica_study(folder, [[f"replica{place}"] for place in range(4)]))


def test_regrouped_replicas_give_the_same_bits_as_sorted_files(
    folder: Path, from_replicas: rw.DensityOfStates
) -> None:
    from_sorted = rw.combine(sorted_study(folder, [f"sorted{place}" for place in range(4)]))

    assert from_replicas.description.exchange
    assert from_replicas.runs[0].tally.leaves is not None  # else half of the comparison is empty
    assert [run.name for run in from_replicas.runs] == ["1", "1.125", "1.25", "1.40625"]
    assert_same_tallies(from_replicas, from_sorted)


def test_the_account_of_replica_files_is_complete(from_replicas: rw.DensityOfStates) -> None:
    rows = dict.fromkeys([f"replica{place}" for place in range(4)], 0)
    for run in from_replicas.runs:
        assert sum(entry["kept"] for entry in run.files) == run.samples
        assert sum(entry["transient"] for entry in run.files) == run.transient_rows
        for entry in run.files:
            parts = ("kept", "transient", "replaced", "dropped")
            assert entry["rows_read"] == sum(entry[part] for part in parts)
            rows[entry["path"]] += entry["rows_read"]
    assert set(rows.values()) == {ROWS}


def test_the_record_of_replicas_is_what_a_loop_finds(from_replicas: rw.DensityOfStates) -> None:
    energies, _, replicas = exchange(ROWS)
    record = from_replicas.replicas
    assert record is not None
    moved, trips, ends = np.zeros(3), [0] * 4, [[] for _ in range(4)]
    for before, after in pairwise(replicas):
        for cold in range(3):
            moved[cold] += before[cold] == after[cold + 1] and before[cold + 1] == after[cold]
    for row in replicas:
        for end in (0, 3):
            path = ends[row[end]]
            if not path or path[-1] != end:
                path.append(end)
    trips = [max(len(path) - 1, 0) // 2 for path in ends]
    gain = (1 / TEMPERATURES[:-1] - 1 / TEMPERATURES[1:]) * (energies[:, :-1] - energies[:, 1:])

    assert record.rows == ROWS
    assert record.exchanged == pytest.approx(moved / (ROWS - 1))
    assert record.round_trips == tuple(trips)
    assert min(trips) > 100
    assert record.acceptance == pytest.approx(np.minimum(1, np.exp(gain)).mean(axis=0))
    for replica in range(4):
        assert record.residence[replica] == pytest.approx((replicas == replica).mean(axis=0))


def test_the_record_is_kept_in_the_combined_file(from_replicas: rw.DensityOfStates, tmp_path: Path) -> None:
    rw.save(from_replicas, tmp_path / "c.nc")

    assert rw.open_combined(tmp_path / "c.nc").replicas == from_replicas.replicas


def test_runs_read_into_memory_are_sorted_too(folder: Path, tmp_path: Path) -> None:
    study = replica_study(folder, [[f"replica{place}"] for place in range(4)])

    tree = rw.read_runs(study)

    energies = exchange(ROWS)[0]
    for place, (name, child) in enumerate(tree.children.items()):
        np.testing.assert_array_equal(child["energy"], energies[:, place])
        assert float(child["temperature"]) == TEMPERATURES[place] == float(name)


def test_a_restart_of_replicas_replaces_rows_before_they_are_sorted(tmp_path: Path) -> None:
    """The first 1500 rows, then the run again from row 1200 on, in files of their own."""
    good, overtaken = replica_tables(3000), replica_tables(3000, seed=8)
    for place in range(4):
        write(tmp_path / f"a{place}", np.concatenate([good[place][:1200], overtaken[place][1200:1500]]))
        write(tmp_path / f"b{place}", good[place][1200:])
        write(tmp_path / f"sorted{place}", sorted_tables(3000)[place])

    combined = rw.combine(replica_study(tmp_path, [[f"a{place}", f"b{place}"] for place in range(4)]))

    assert_same_tallies(
        combined, rw.combine(sorted_study(tmp_path, [f"sorted{place}" for place in range(4)]))
    )
    for place in range(4):
        entries = [entry for run in combined.runs for entry in run.files if entry["path"] == f"a{place}"]
        assert sum(entry["replaced"] for entry in entries) == 300
        assert sum(entry["rows_read"] for entry in entries) == 1500


def test_rows_after_the_end_of_the_shortest_replica_are_dropped_with_the_reason(tmp_path: Path) -> None:
    tables = replica_tables(1000)
    for place, rows in enumerate(tables):
        write(tmp_path / f"r{place}", rows[: 900 if place == 2 else 1000])

    combined = rw.combine(replica_study(tmp_path, [[f"r{place}"] for place in range(4)]))

    assert {run.rows for run in combined.runs} == {900}
    entries = [entry for run in combined.runs for entry in run.files]
    assert sum(entry["dropped"] for entry in entries) == 300
    assert {entry["why_dropped"] for entry in entries if entry["path"] != "r2"} == {
        "later than the end of the shortest replica"
    }


NO_CLOCK = HEAD.replace('time = "t"\ntime_unit = "sweep"\n', "")


def test_without_a_clock_replicas_must_be_equally_long(tmp_path: Path) -> None:
    for place, rows in enumerate(replica_tables(1000)):
        write(tmp_path / f"r{place}", rows[: 900 if place == 2 else 1000])

    with pytest.raises(DataFileError, match=r"r0, row 901: replicas must have the same number of rows"):
        regrouped(replica_study(tmp_path, [[f"r{place}"] for place in range(4)], NO_CLOCK))


@pytest.mark.parametrize(
    ("head", "message"),
    [
        (HEAD, r"r0, row 401: replicas must be recorded at the same times; got 4000 here and 4010 in r2"),
        (NO_CLOCK, r"row \d+: every temperature must be held by one replica at any time; got none at 1"),
    ],
)
def test_a_replica_that_lacks_a_row_is_refused(tmp_path: Path, head: str, message: str) -> None:
    for place, rows in enumerate(replica_tables(1000)):
        write(tmp_path / f"r{place}", np.delete(rows, 400, axis=0) if place == 2 else rows)

    with pytest.raises(DataFileError, match=message):
        regrouped(replica_study(tmp_path, [[f"r{place}"] for place in range(4)], head))


def test_a_temperature_held_twice_is_refused(tmp_path: Path) -> None:
    tables = replica_tables(1000)
    for place, rows in enumerate(tables[:3] + tables[:1]):
        write(tmp_path / f"r{place}", rows)

    with pytest.raises(
        DataFileError, match=r"every temperature must be held by one replica; got .* in r0, r3"
    ):
        regrouped(replica_study(tmp_path, [[f"r{place}"] for place in range(4)]))


def test_the_instantaneous_temperature_of_a_thermostat_is_refused(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    for place, rows in enumerate(replica_tables(1000)):
        rows[:, 1] = np.round(rows[:, 1] * rng.normal(1, 0.02, 1000), 3)
        write(tmp_path / f"r{place}", rows)

    with pytest.raises(
        DataFileError, match=r"row 2: .* one of the ladder .*instantaneous temperature, which fluctuates"
    ):
        regrouped(replica_study(tmp_path, [[f"r{place}"] for place in range(4)]))


def study_with_column(folder: Path, files: list[str], extra: str = "") -> Study:
    head = HEAD.replace('energy = "E"\n', 'energy = "E"\ntemperature = "T"\n')
    return parse_study(f"{head}{OBSERVABLE}[[run]]\nfiles = {files}\n{extra}", folder=folder)


@pytest.mark.parametrize("order", ["row by row", "one after the other"])
def test_a_file_with_several_temperatures_gives_the_same_bits_as_one_file_each(
    tmp_path: Path, order: str
) -> None:
    tables = sorted_tables(5000)
    for place, rows in enumerate(tables):
        write(tmp_path / f"sorted{place}", rows)
    together = (
        np.stack(tables, axis=1).reshape(-1, 4) if order == "row by row" else np.concatenate(tables[::-1])
    )
    write(tmp_path / "all", together[:7000])
    write(tmp_path / "more", together[7000:])

    combined = rw.combine(study_with_column(tmp_path, ["all", "more"]))

    assert not combined.description.exchange
    assert combined.replicas is None
    assert_same_tallies(
        combined, rw.combine(sorted_study(tmp_path, [f"sorted{place}" for place in range(4)], exchange=False))
    )
    entries = [entry for run in combined.runs for entry in run.files]
    assert sum(entry["rows_read"] for entry in entries if entry["path"] == "all") == 7000


def test_several_runs_with_a_column_of_temperatures_are_named_after_both(tmp_path: Path) -> None:
    tables = sorted_tables(500)
    write(tmp_path / "a", np.concatenate(tables[:2]))
    write(tmp_path / "b", np.concatenate(tables[2:]))

    combined = rw.combine(study_with_column(tmp_path, ["a"], '[[run]]\nfiles = "b"\n'))

    assert [run.name for run in combined.runs] == ["a, 1", "a, 1.125", "b, 1.25", "b, 1.40625"]


@pytest.mark.parametrize(
    ("digits", "rows", "message"),
    [
        (6, 2000, "at most 256 temperatures; got more in the first 2000 rows"),
        (0, 3000, "must hold a ladder of temperatures; got .* in only [1-9] of them"),
        (6, 100, "must hold a ladder of temperatures; got 100 values in 100 rows"),
    ],
)
def test_a_fluctuating_column_is_no_ladder(tmp_path: Path, digits: int, rows: int, message: str) -> None:
    """A thermostat at 300 K, fluctuating by 7 K, printed with few digits or many."""
    rng = np.random.default_rng(11)
    temperatures = np.round(rng.normal(300, 7, rows), digits)
    write(tmp_path / "a", table(np.arange(rows), temperatures, rng.normal(size=rows), rng.normal(size=rows)))

    with pytest.raises(DataFileError, match=f"{message}.*instantaneous temperature, which fluctuates"):
        rw.combine(study_with_column(tmp_path, ["a"]))


@pytest.mark.parametrize(
    ("unit", "temperature", "message"),
    [
        ("", 30.0, "temperature_unit must be given, because temperatures below 200 .*got 30 in a row of"),
        ('temperature_unit = "K"\n', -3.0, "row 1: temperatures must lie above absolute zero; got -3"),
        (
            'temperature_unit = "degC"\n',
            -273.15,
            "row 1: temperatures must lie above absolute zero; got -273.15",
        ),
    ],
)
def test_temperatures_that_are_ambiguous_or_impossible_are_refused(
    tmp_path: Path, unit: str, temperature: float, message: str
) -> None:
    rows = np.arange(40.0)
    write(tmp_path / "a", table(rows, np.full(40, temperature), rows, rows))
    head = HEAD.replace('"reduced"\n', f'"eV"\n{unit}').replace(
        "[columns]\n", '[columns]\ntemperature = "T"\n'
    )
    study = parse_study(f'{head}{OBSERVABLE}[[run]]\nfiles = "a"\n', folder=tmp_path)

    with pytest.raises(rw.ReweightError, match=message):
        rw.combine(study)


def test_rows_set_aside_come_back_in_order_in_memory_or_not() -> None:
    for rows in (10, 300_000):  # the second does not stay in memory
        spool = Spool(2)
        values = np.random.default_rng(1).normal(size=(rows, 2))
        for start in range(0, rows, 70_001):
            spool.add(values[start : start + 70_001], start // 70_001)

        np.testing.assert_array_equal(np.concatenate(list(spool.chunks())), values)
        assert spool.rows_of_files(9, 5).tolist() == [9, 0, 0, 0, 0]
        assert spool.rows_of_files(rows, 5).sum() == rows


def test_a_full_disk_is_one_clear_message(monkeypatch: pytest.MonkeyPatch) -> None:
    def full(_: bytes) -> int:
        raise OSError(errno.ENOSPC, "No space left on device")

    spool = Spool(1)
    monkeypatch.setattr(spool._file, "write", full)

    with pytest.raises(rw.InputError, match=r"No space left on device.* set the environment variable TMPDIR"):
        spool.add(np.zeros((3, 1)), 0)


def test_the_record_is_plain_json(from_replicas: rw.DensityOfStates) -> None:
    assert from_replicas.replicas is not None
    json.dumps(dataclasses.asdict(from_replicas.replicas), allow_nan=False)
