"""Continuing an earlier combined file: the same bytes as from scratch, and only what is new is read.

Judged by the bytes of the saved file, which hold every number of the combined object and its whole ledger; that equal
objects give equal files, and others do not, is shown in tests/test_saving.py.  What is read again is told by the
sentences, and what is not read by a reader that counts the rows it hands out.
"""

from __future__ import annotations

import gzip
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
from numpy.typing import NDArray

import reweight as rw
from reweight.errors import CombinedFileError, DataFileError, InputError
from reweight.study import load_study

Rows = NDArray[np.float64]

HEAD = """\
schema = 1
energy_unit = "reduced"

[columns]
energy = "energy"

[observables.m]
column = "m"
"""
LONG = 70_000  # rows: sums are made of the first 65,536, the others are kept


def gamma(temperature: float, rows: int, seed: int = 0) -> Rows:
    """Energies about as at this temperature, and an observable."""
    rng = np.random.default_rng([seed, int(1000 * temperature)])
    return np.stack([rng.gamma(30.0, 1.5 * temperature, rows), rng.standard_normal(rows)], axis=1)


def lattice(temperature: float, rows: int, seed: int = 0) -> Rows:
    """Levels, blurred by rounding: energies are moved to a grid."""
    table = gamma(temperature, rows, seed)
    table[:, 0] = 4 * np.rint(table[:, 0] / 4)
    table[:, 0] += np.random.default_rng(seed).uniform(-1e-5, 1e-5, rows)
    return table


def text(rows: Rows, first: int = 0) -> str:
    """Lines of a data file."""
    return "".join(f"{first + n} {e:.9f} {m:.6f}\n" for n, (e, m) in enumerate(rows.tolist()))


class Project:
    """A study in a folder, its data files, and the sentences told by the last combination."""

    def __init__(self, folder: Path, head: str = HEAD) -> None:
        self.folder = folder
        self.head = head
        self.runs: dict[str, tuple[float, list[str], str]] = {}
        self.told: list[str] = []
        self.tallied: dict[str, int] = {}

    def write(self, file: str, rows: Rows, first: int = 0) -> None:
        """Write a data file whose first column counts from `first`."""
        (self.folder / file).write_text("# step energy m\n" + text(rows, first))

    def append(self, file: str, addition: str) -> None:
        """Let a data file grow."""
        with (self.folder / file).open("a") as stream:
            stream.write(addition)

    def run(self, name: str, temperature: float, files: Sequence[str], more: str = "") -> None:
        """Describe a run, or describe it anew."""
        self.runs[name] = (temperature, list(files), more)

    @property
    def study(self) -> Path:
        """The study file, written as described so far."""
        path = self.folder / "study.toml"
        path.write_text(
            self.head
            + "".join(
                f'\n[[run]]\nname = "{name}"\ntemperature = {temperature}\nfiles = {files}\n{more}\n'
                for name, (temperature, files, more) in self.runs.items()
            ).replace("'", '"')
        )
        return path

    def combine(self, continued: Any = None) -> rw.DensityOfStates:
        """Combine; `told` and `tallied` say afterwards what was told, and how many rows of each run were read."""
        self.told, self.tallied = [], {}

        def count(run: str, rows: int) -> None:
            self.tallied[run] = self.tallied.get(run, 0) + rows

        return rw.combine(self.study, continued=continued, tell=self.told.append, progress=count)

    def saved(self, combined: rw.DensityOfStates, name: str) -> bytes:
        """Save and return every byte."""
        path = self.folder / name
        rw.save(combined, path, force=True)
        return path.read_bytes()

    def first(self) -> Path:
        """Combine and save what is to be continued."""
        self.saved(self.combine(), "old.nc")
        return self.folder / "old.nc"

    def continue_and_compare(self, old: Path) -> None:
        """Continue, and find the same bytes as from scratch."""
        scratch = self.saved(self.combine(), "scratch.nc")
        same = self.saved(self.combine(old), "continued.nc") == scratch
        assert same


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """Two sound runs: a long one, and one with rows only."""
    made = Project(tmp_path)
    made.write("cold.dat", gamma(1.0, LONG))
    made.write("hot.dat", gamma(1.2, 3000))
    made.run("cold", 1.0, ["cold.dat"])
    made.run("hot", 1.2, ["hot.dat"])
    return made


# --- what has only grown is not read again ----------------------------------------------------------------------------


def test_nothing_new_reads_nothing(project):
    old = project.first()
    cold, hot = rw.open_combined(old).runs
    assert cold.tally.leaves is not None  # else sums are not what is continued
    assert hot.tally.leaves is None

    project.continue_and_compare(old)

    assert project.told == []
    assert sum(project.tallied.values()) == 0


def test_what_the_old_file_holds_is_what_is_used(project):
    """Negative control: one stored number that is another gives another file, so the bytes of the others say something."""
    old = project.first()
    with netCDF4.Dataset(old, "a") as file:
        file["run_0001"]["kept_rows"][1000, 1] += 1e-9

    with pytest.raises(AssertionError):
        project.continue_and_compare(old)


@pytest.mark.parametrize("added", [1, 7000, 70_000])
def test_runs_that_have_grown_are_read_from_where_they_ended(added, project):
    old = project.first()
    project.append("cold.dat", text(gamma(1.0, added, seed=1), LONG))
    project.append("hot.dat", text(gamma(1.2, 1, seed=1), 3000))

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": added, "hot": 1}


@pytest.mark.parametrize("make", [gamma, lattice])
@pytest.mark.parametrize("start", [50, 4095, 30_000])
def test_a_run_that_has_grown_ten_times_has_the_same_bits(make, start, tmp_path):
    project = Project(tmp_path)
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        project.write(f"{name}.dat", make(temperature, start))
        project.run(name, temperature, [f"{name}.dat"])
    project.write("fixed.dat", make(1.1, 6000))
    project.run("fixed", 1.1, ["fixed.dat"])
    old = project.first()
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        project.append(f"{name}.dat", text(make(temperature, 9 * start, seed=1), start))

    project.continue_and_compare(old)

    if start > 4096:
        # With fewer first energies, more of them may change the intervals, and then all is read again.
        assert project.told == []
        assert project.tallied == {"cold": 9 * start, "hot": 9 * start, "fixed": 0}


def test_a_file_is_continued_in_many_sittings(project):
    old = project.first()
    for sitting in range(3):
        project.append("cold.dat", text(gamma(1.0, 30_000, seed=sitting + 1), LONG + 30_000 * sitting))
        project.saved(project.combine(old), "old.nc")
        assert project.tallied["cold"] == 30_000

    project.continue_and_compare(old)


def test_a_new_file_of_a_run_is_read_alone(project):
    old = project.first()
    project.write("cold-2.dat", gamma(1.0, 500, seed=1), LONG)
    project.run("cold", 1.0, ["cold.dat", "cold-2.dat"])

    project.continue_and_compare(old)

    assert project.tallied == {"cold": 500, "hot": 0}
    assert [entry["rows_read"] for entry in project.combine(old).runs[0].files] == [LONG, 500]


def test_a_file_that_has_grown_and_a_new_one_after_it_are_read_where_new(project):
    old = project.first()
    project.append("cold.dat", text(gamma(1.0, 100, seed=1), LONG))
    project.write("cold-2.dat", gamma(1.0, 500, seed=2), LONG + 100)
    project.run("cold", 1.0, ["cold.dat", "cold-2.dat"])

    project.continue_and_compare(old)

    assert project.tallied == {"cold": 600, "hot": 0}


def test_a_new_temperature_inside_the_range_is_read_alone(project):
    old = project.first()
    project.write("middle.dat", gamma(1.1, 2000))
    project.run("middle", 1.1, ["middle.dat"])

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 0, "hot": 0, "middle": 2000}


def test_a_new_run_does_not_disturb_a_grid_found_before(tmp_path):
    project = Project(tmp_path)
    for name, temperature in (("cold", 1.0), ("hot", 1.2), ("middle", 1.1)):
        rows = lattice(temperature, 6000, seed=int(10 * temperature))
        if name == "middle":
            rows[:, 0] += np.random.default_rng(3).uniform(-2e-5, 2e-5, 6000)
        project.write(f"{name}.dat", rows)
        if name != "middle":
            project.run(name, temperature, [f"{name}.dat"])
    old = project.first()
    project.run("middle", 1.1, ["middle.dat"])

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 0, "hot": 0, "middle": 6000}
    spacings = [run.tally.nodes.spacing for run in project.combine(old).runs]
    assert spacings[0] is not None
    assert spacings[0] == spacings[2]
    assert spacings[0] != rw.open_combined(old).runs[0].tally.nodes.spacing  # the largest shift is another


def test_name_temperature_and_start_of_a_run_may_change(project):
    old = project.first()
    project.runs.clear()
    project.run("renamed", 1.0, ["cold.dat"], "discard = 100")
    project.run("hot", 1.21, ["hot.dat"])

    project.continue_and_compare(old)

    assert project.told == []
    assert sum(project.tallied.values()) == 0
    assert [run.name for run in project.combine(old).runs] == ["renamed", "hot"]


def test_a_file_may_be_moved_if_the_run_keeps_its_name(project):
    old = project.first()
    (project.folder / "cold.dat").rename(project.folder / "moved.dat")
    project.run("cold", 1.0, ["moved.dat"])

    project.continue_and_compare(old)

    assert sum(project.tallied.values()) == 0
    assert project.combine(old).runs[0].files[0]["path"] == "moved.dat"


def test_a_run_may_be_left_out_and_taken_back(project):
    project.write("middle.dat", gamma(1.1, 2000))
    project.run("middle", 1.1, ["middle.dat"])
    old = project.first()
    project.run("middle", 1.1, ["middle.dat"], 'use = false\nreason = "wrong box"')

    project.continue_and_compare(old)
    project.saved(project.combine(old), "old.nc")
    project.run("middle", 1.1, ["middle.dat"])
    project.continue_and_compare(old)

    assert project.tallied == {"cold": 0, "hot": 0, "middle": 2000}


@pytest.mark.parametrize("make", [gamma, lattice])
def test_replica_exchange_is_continued_with_its_common_start_found_anew(make, tmp_path):
    project = Project(tmp_path, HEAD + "\n[conditions]\nexchange = true\n")
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        project.write(f"{name}.dat", make(temperature, 66_000))
        project.run(name, temperature, [f"{name}.dat"])
    old = project.first()
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        project.append(f"{name}.dat", text(make(temperature, 1000, seed=1), 66_000))

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 1000, "hot": 1000}


def test_levels_that_become_too_many_are_poured_as_from_scratch(tmp_path):
    rng = np.random.default_rng(7)
    project = Project(tmp_path)

    def rows(energies: Rows) -> Rows:
        return np.stack([energies, np.zeros(energies.size)], axis=1)

    few = rows(rng.integers(0, 500, 66_000) / 8)
    many = rows(rng.integers(0, 80_000, 70_000) / 1024)
    for name, temperature in (("one", 1.0), ("two", 1.0)):
        project.write(f"{name}.dat", few)
        project.run(name, temperature, [f"{name}.dat"])
    old = project.first()
    assert rw.open_combined(old).runs[0].tally.nodes.discrete
    project.append("one.dat", text(many, 66_000))

    project.continue_and_compare(old)
    assert project.told == []
    old = (project.folder / "continued.nc").rename(old)
    assert not rw.open_combined(old).runs[0].tally.nodes.discrete
    project.append("one.dat", text(few[:1000], 136_000))
    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"one": 1000, "two": 0}


def test_a_combined_object_in_memory_is_continued_and_not_changed(project):
    earlier = project.combine()
    before = project.saved(earlier, "before.nc")
    project.append("cold.dat", text(gamma(1.0, 70_000, seed=1), LONG))

    project.continue_and_compare(earlier)

    assert project.saved(earlier, "after.nc") == before


def test_the_time_between_rows_has_the_same_bits(tmp_path):
    head = HEAD.replace('energy = "energy"', 'energy = "energy"\ntime = "step"\ntime_unit = "ps"')
    project = Project(tmp_path, head)
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        table = text(gamma(temperature, 5000))
        stamped = (f"{0.3 * n:.2f} {line.split(' ', 1)[1]}" for n, line in enumerate(table.splitlines(True)))
        lines = ["# step energy m\n", *stamped]
        (tmp_path / f"{name}.dat").write_text("".join(lines[:3001]))
        project.run(name, temperature, [f"{name}.dat"])
        if name == "cold":
            rest = "".join(lines[3001:])
    old = project.first()
    project.append("cold.dat", rest)

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 2000, "hot": 0}
    clock = project.combine(old).runs[0].clock
    assert clock is not None
    assert clock.step == pytest.approx(0.3)


TIMED = HEAD.replace('energy = "energy"', 'energy = "energy"\ntime = "step"\ntime_unit = "step"')


def test_a_restart_behind_the_end_is_read_alone(project):
    project.head = TIMED
    old = project.first()
    project.append("cold.dat", "# step energy m\n" + text(gamma(1.0, 100, seed=1), LONG))
    project.write("cold-2.dat", gamma(1.0, 500, seed=2), LONG + 100)
    project.run("cold", 1.0, ["cold.dat", "cold-2.dat"])

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 600, "hot": 0}
    assert project.combine(old).runs[0].files[0]["repeated_headers"] == 1


def test_replaced_rows_known_before_are_not_counted_twice(project):
    project.head = TIMED
    project.write("hot-2.dat", gamma(1.2, 500, seed=2), 2900)
    project.run("hot", 1.2, ["hot.dat", "hot-2.dat"])
    old = project.first()
    project.append("hot-2.dat", text(gamma(1.2, 50, seed=3), 3400))

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": 0, "hot": 50}
    assert project.combine(old).runs[1].files[0]["replaced"] == 100


@pytest.mark.parametrize("appended", [True, False])
def test_a_restart_that_replaces_known_rows_makes_the_run_be_read_again(appended, project):
    project.head = TIMED
    old = project.first()
    if appended:
        project.append("hot.dat", "# step energy m\n" + text(gamma(1.2, 500, seed=1), 2900))
    else:
        project.write("hot-2.dat", gamma(1.2, 500, seed=1), 2900)
        project.run("hot", 1.2, ["hot.dat", "hot-2.dat"])

    project.continue_and_compare(old)

    assert project.told == [
        "run 'hot' is read again from its start: rows that were read before have been written again by a restart"
    ]
    assert project.tallied == {"cold": 0, "hot": 3400}


@pytest.mark.parametrize("added", [1, 20])
def test_constant_pressure_is_continued(added, project):
    project.head = (
        HEAD.replace("[observables.m]", '[conditions]\npressure = "0.01 reduced"\n\n[observables.m]')
        .replace('energy = "energy"', 'energy = "energy"\nvolume = "volume"\nvolume_unit = "reduced"')
        .replace('column = "m"', 'column = "volume"')
    )
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        rows = gamma(temperature, 3000)
        rows[:, 1] = 100 + rows[:, 1]
        project.write(f"{name}.dat", rows)
        path = project.folder / f"{name}.dat"
        path.write_text(path.read_text().replace("energy m", "energy volume"))
    old = project.first()
    # The volume of all that is new is the same: with few rows no sign of a volume held fixed.
    project.append("cold.dat", "".join(f"{3000 + n} {45 + n / 7:.6f} 101.5\n" for n in range(added)))

    project.continue_and_compare(old)

    assert project.told == []
    assert project.tallied == {"cold": added, "hot": 0}


def test_a_log_that_has_grown_is_read_again(project):
    project.head = HEAD + '\n[format]\ntable = "step energy m"\n'
    for name, temperature in (("cold", 1.0), ("hot", 1.2)):
        path = project.folder / f"{name}.dat"
        path.write_text("program starts\nstep energy m\n" + text(gamma(temperature, 3000)) + "done\n")
    old = project.first()
    project.append("cold.dat", "step energy m\n" + text(gamma(1.0, 10, seed=1), 3000))

    project.continue_and_compare(old)

    assert project.told == [
        "run 'cold' is read again from its start: a log has grown, and what its rows belong to is told from its start"
    ]
    assert project.tallied == {"cold": 3010, "hot": 0}


def test_files_with_several_temperatures_are_read_as_a_whole(tmp_path):
    project = Project(tmp_path, HEAD.replace('energy = "energy"', 'energy = "energy"\ntemperature = "step"'))
    rows = [(t, *row) for t in (1.0, 1.2) for row in gamma(t, 500).tolist()]
    (tmp_path / "both.dat").write_text(
        "# step energy m\n" + "".join("{:.1f} {:.9f} {:.6f}\n".format(*row) for row in rows)
    )
    (tmp_path / "study.toml").write_text(project.head + '\n[[run]]\nfiles = ["both.dat"]\n')
    earlier = rw.combine(tmp_path / "study.toml")
    told: list[str] = []

    continued = rw.combine(tmp_path / "study.toml", continued=earlier, tell=told.append)

    assert project.saved(continued, "continued.nc") == project.saved(earlier, "old.nc")
    assert told == [
        "files that hold several temperatures are read as a whole: every file is read again from its start"
    ]


def test_blank_lines_and_comments_are_counted_on(project):
    project.append("hot.dat", "\n# restarted\n\n" + text(gamma(1.2, 10, seed=1), 3000))
    old = project.first()
    project.append("hot.dat", "   \n" + text(gamma(1.2, 10, seed=2), 3010))

    project.continue_and_compare(old)

    assert project.combine(old).runs[1].files[0]["blank_lines"] == 3
    assert project.told == []


# --- what is read again, and said -------------------------------------------------------------------------------------


def test_a_narrower_run_outside_the_range_makes_all_files_be_read_again(project):
    old = project.first()
    project.write("frozen.dat", gamma(0.5, 2000) * [0.25, 1.0] + [20.0, 0.0])
    project.run("frozen", 0.9, ["frozen.dat"])

    project.continue_and_compare(old)

    (told,) = project.told
    assert "intervals of" in told
    assert told.endswith("every file is read again from its start")
    assert project.tallied == {"cold": LONG, "hot": 3000, "frozen": 2000}


def test_a_temperature_far_outside_makes_all_files_be_read_again(tmp_path):
    project = Project(tmp_path)
    for name, temperature in (("a", 1.0), ("b", 1.05), ("c", 0.2)):
        project.write(f"{name}.dat", np.abs(gamma(1.0, 3000)) * [3.0, 1.0])
        if name != "c":
            project.run(name, temperature, [f"{name}.dat"])
    old = project.first()
    project.run("c", 0.2, ["c.dat"])

    project.continue_and_compare(old)

    (told,) = project.told
    assert "temperatures lie further apart" in told


def test_changed_bytes_make_that_run_be_read_again(project):
    old = project.first()
    path = project.folder / "cold.dat"
    lines = path.read_text().splitlines(keepends=True)
    lines[30_000] = lines[30_000].replace(".", ".1", 1)
    path.write_text("".join(lines))

    project.continue_and_compare(old)

    assert project.told == [
        "run 'cold' is read again from its start: cold.dat has changed in the part that was read before"
    ]
    assert project.tallied == {"cold": LONG, "hot": 0}


def test_a_shorter_file_is_read_again(project):
    old = project.first()
    project.write("hot.dat", gamma(1.2, 2000))

    project.continue_and_compare(old)

    assert project.told == ["run 'hot' is read again from its start: hot.dat is shorter than before"]


def test_a_file_that_ended_in_the_midst_of_a_comment_is_read_again(project):
    project.append("hot.dat", "# stopp")
    old = project.first()
    project.append("hot.dat", "ed\n" + text(gamma(1.2, 10, seed=1), 3000))

    project.continue_and_compare(old)

    assert project.told == [
        "run 'hot' is read again from its start: hot.dat has grown in the midst of its last line"
    ]


def test_a_file_that_has_grown_before_another_is_read_again(project):
    project.write("cold-2.dat", gamma(1.0, 500, seed=2), LONG)
    project.run("cold", 1.0, ["cold.dat", "cold-2.dat"])
    old = project.first()
    project.append("cold.dat", text(gamma(1.0, 100, seed=1), LONG))

    project.continue_and_compare(old)

    assert project.told == [
        "run 'cold' is read again from its start: cold.dat has grown before cold-2.dat, which was read after it"
    ]


def test_a_run_with_fewer_files_is_read_again(project):
    project.write("hot-2.dat", gamma(1.2, 500, seed=2), 3000)
    project.run("hot", 1.2, ["hot.dat", "hot-2.dat"])
    old = project.first()
    project.run("hot", 1.2, ["hot.dat"])

    project.continue_and_compare(old)

    assert project.told == ["run 'hot' is read again from its start: it has 1 files now and had 2"]


def write_gzip(path: Path, rows: Rows) -> None:
    path.write_bytes(gzip.compress(("# step energy m\n" + text(rows)).encode(), mtime=0))


def write_netcdf(path: Path, rows: Rows) -> None:
    with netCDF4.Dataset(path, "w") as file:
        file.createDimension("row", rows.shape[0])
        for name, column in zip(("energy", "m"), rows.T, strict=True):
            file.createVariable(name, "f8", ("row",))[:] = column


def write_wide(path: Path, rows: Rows) -> None:
    path.write_text("# step energy m\n" + text(rows), encoding="utf-16")


@pytest.mark.parametrize("write", [write_gzip, write_netcdf, write_wide])
def test_other_files_than_plain_text_are_known_as_a_whole_or_read_again(write, project):
    if write is write_wide:
        project.head += '\n[format]\nencoding = "utf-16"\n'
        write(project.folder / "cold.dat", gamma(1.0, 5000))
    write(project.folder / "hot.dat", gamma(1.2, 3000))
    old = project.first()
    project.continue_and_compare(old)
    assert project.told == []
    assert sum(project.tallied.values()) == 0

    write(project.folder / "hot.dat", gamma(1.2, 3500))
    project.continue_and_compare(old)

    (told,) = project.told
    assert told.startswith("run 'hot' is read again from its start: hot.dat has ")
    assert project.tallied["hot"] == 3500
    assert project.tallied["cold"] == 0


def test_a_second_gzip_member_is_not_taken_for_lines(project):
    path = project.folder / "hot.dat"
    write_gzip(path, gamma(1.2, 3000))
    old = project.first()
    more = gzip.compress(text(gamma(1.2, 10, seed=1), 3000).encode(), mtime=0)
    path.write_bytes(path.read_bytes() + more)

    project.continue_and_compare(old)

    assert project.told == [
        "run 'hot' is read again from its start: hot.dat has grown, and only plain text can be taken up in its midst"
    ]


@pytest.mark.parametrize(
    ("before", "after", "key"),
    [
        ('energy_unit = "reduced"', 'energy_unit = "kJ/mol"', "energy_unit, temperature_unit"),
        ('energy = "energy"', "energy = 2", "columns.energy"),
        ('column = "m"', 'column = "m"\nmoments = [1, 2]', "observables.m"),
        ('column = "m"', 'column = "m"\nabove = 0.5', "observables.m"),
        ("[observables.m]", "[system]\ncount = 2\n\n[observables.m]", "system.count"),
        ("[observables.m]", '[observables.n]\ncolumn = "m"\n\n[observables.m]', "observables.n"),
    ],
)
def test_another_meaning_of_the_rows_makes_all_files_be_read_again(before, after, key, project):
    old = project.first()
    assert before in project.head
    project.head = project.head.replace(before, after)
    for name, t in (("cold", 360.8), ("hot", 433.0)):
        if "kJ" in after:
            project.run(name, t, [f"{name}.dat"])

    project.continue_and_compare(old)

    assert project.told == [
        f"the study says something else than before ({key}): every file is read again from its start"
    ]
    assert project.tallied == {"cold": LONG, "hot": 3000}


def test_the_order_of_observables_counts(project):
    second = '\n[observables.energy_again]\ncolumn = "energy"\n'
    project.head += second
    old = project.first()
    project.head = HEAD.replace("[observables.m]", second.strip() + "\n\n[observables.m]")

    project.continue_and_compare(old)

    assert "order of observables" in project.told[0]


@pytest.mark.parametrize(
    ("before", "after"),
    [
        ("schema = 1", 'schema = 1\ntitle = "A title"'),
        ("schema = 1", 'schema = 1\nweighting = "samples"'),
        ("[observables.m]", '[system]\nlength = 8.0\nstates = "2^64"\n\n[observables.m]'),
        ("[observables.m]", "[format]\nlargest_line = 2000000\n\n[observables.m]"),
        ("[observables.m]", "[conditions]\ndegrees_of_freedom = 30\n\n[observables.m]"),
    ],
)
def test_what_does_not_touch_the_rows_may_change(before, after, project):
    old = project.first()
    project.head = project.head.replace(before, after)

    project.continue_and_compare(old)

    assert project.told == []
    assert sum(project.tallied.values()) == 0


def test_a_finer_resolution_makes_all_files_be_read_again(project):
    old = project.first()
    project.head = project.head.replace("schema = 1", "schema = 1\nresolution = 0.1")

    project.continue_and_compare(old)

    assert "the resolution was changed" in project.told[0]


def test_a_file_of_another_version_is_not_continued(project, monkeypatch):
    monkeypatch.setattr("reweight.studies.VERSION", "0.0.9")
    old = project.first()
    monkeypatch.undo()

    project.continue_and_compare(old)

    assert "made by another version of reweight (0.0.9, now" in project.told[0]


def test_a_combined_file_that_did_not_keep_first_energies_is_read_again(project):
    old = project.first()
    with netCDF4.Dataset(old, "a") as file:
        file["run_0000"].renameVariable("first_energies", "something_else")

    project.continue_and_compare(old)

    assert project.told == [
        "the earlier file does not hold the first energies of its runs: every file is read again from its start"
    ]


@pytest.mark.parametrize("ledger", ["[]", '[{"path": "cold.dat"}]', '[{"odd": 1}]'])
def test_a_damaged_ledger_is_no_use(ledger, project):
    old = project.first()
    with netCDF4.Dataset(old, "a") as file:
        file["run_0000"].files = ledger

    project.continue_and_compare(old)

    if ledger != "[]":
        assert project.told == [
            "run 'cold' is read again from its start: the earlier file does not say what was read of cold.dat"
        ]
    assert project.tallied == {"cold": LONG, "hot": 0}


def test_a_combined_file_of_another_study_helps_nothing_and_does_no_harm(project, tmp_path):
    old = project.first()
    for name, temperature in (("x", 2.0), ("y", 2.2)):
        project.write(f"{name}.dat", gamma(temperature, 3000))
    project.runs.clear()
    project.run("x", 2.0, ["x.dat"])
    project.run("y", 2.2, ["y.dat"])

    project.continue_and_compare(old)

    assert project.tallied == {"x": 3000, "y": 3000}


# --- refused ----------------------------------------------------------------------------------------------------------


def test_faults_in_what_is_new_are_refused_by_their_line(project):
    old = project.first()
    project.append("hot.dat", text(gamma(1.2, 2, seed=1), 3000) + "3002 nan 0.1\n")

    with pytest.raises(
        DataFileError, match=r"hot\.dat, line 3004: column 'energy' must hold finite numbers; got 'nan'"
    ):
        project.combine(old)


def test_a_missing_file_is_refused_as_from_scratch(project):
    old = project.first()
    (project.folder / "hot.dat").unlink()

    with pytest.raises(DataFileError, match=r"hot\.dat: data file must be readable"):
        project.combine(old)


def test_runs_in_memory_are_not_continued(project):
    old = project.first()
    runs = {"a": gamma(1.0, 100)[:, 0], "b": gamma(1.1, 100)[:, 0]}

    with pytest.raises(InputError, match="continued must go with a study file"):
        rw.combine(runs, temperatures=[1.0, 1.1], continued=old)
    in_memory = rw.combine(runs, temperatures=[1.0, 1.1])
    with pytest.raises(InputError, match="must be made from a study file; got one made from runs in memory"):
        project.combine(in_memory)


def test_what_is_no_combined_file_is_refused(project):
    with pytest.raises(CombinedFileError, match="must be a combined file written by reweight"):
        project.combine(project.study)
    with pytest.raises(CombinedFileError, match="must exist"):
        project.combine(project.folder / "missing.nc")


def test_a_study_loaded_before_is_continued_too(project):
    old = project.first()

    continued = rw.combine(load_study(project.study), continued=old)

    assert project.saved(continued, "continued.nc") == old.read_bytes()
