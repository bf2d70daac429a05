"""Layouts of files on the command line: patterns, restarts, logs, replicas, and what is said about them."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from reweight.datasets.sampling import draw_gamma

TEMPERATURES = (300.0, 312.0, 325.0)
BOLTZMANN = 8.31446261815324e-3  # kJ/mol/K; CODATA 2018, exact

HEAD = """\
schema = 1
title = "Ladder"
energy_unit = "kJ/mol"
[columns]
energy = "E"
time = "t"
time_unit = "ps"
"""


def energies(place: int, rows: int = 3000) -> np.ndarray:
    rng = np.random.default_rng(60 + place)
    return draw_gamma(30.0, BOLTZMANN * TEMPERATURES[place], rows, rng, coefficient=0.5)


def lines(times: np.ndarray, *columns: np.ndarray) -> str:
    table = np.column_stack([times, *columns])
    return "".join(f"{row[0]:.0f} {' '.join(f'{value:.6f}' for value in row[1:])}\n" for row in table)


def write_replicas(folder: Path, rows: int = 3000) -> None:
    """Three replicas that move one place up the ladder every ten rows."""
    values = np.column_stack([energies(place, rows) for place in range(3)])
    for replica in range(3):
        place = (np.arange(rows) // 10 + replica) % 3
        at = np.arange(rows)
        text = lines(at, np.array(TEMPERATURES)[place], values[at, place])
        (folder / f"replica{replica + 1}.dat").write_text(f"# t T E\n{text}")


REPLICAS = HEAD.replace('energy = "E"\n', 'energy = "E"\ntemperature = "T"\n') + "".join(
    f'[[replica]]\nfiles = "replica{number}.dat"\n' for number in (1, 2, 3)
)


def test_a_pattern_is_sorted_naturally_and_said(tmp_path: Path, reweight) -> None:
    for place in (0, 2):
        values = energies(place)
        for part in range(12):
            at = np.arange(250 * part, 250 * part + 250)
            (tmp_path / f"T{place}-part{part}.dat").write_text(f"# t E\n{lines(at, values[at])}")
    (tmp_path / "study.toml").write_text(
        f'{HEAD}[[run]]\ntemperature = 300\nfiles = "T0-*.dat"\n'
        '[[run]]\ntemperature = 325\nfiles = ["T2-part?.dat", "T2-part??.dat"]\n'
    )

    outcome = reweight("combine", tmp_path / "study.toml")

    assert outcome.status == 0
    first = next(line for line in outcome.stderr.splitlines() if line.startswith("T0-*.dat"))
    assert first.startswith("T0-*.dat is 12 files: T0-part0.dat, T0-part1.dat, T0-part2.dat")
    assert first.endswith("T0-part9.dat, T0-part10.dat, T0-part11.dat")
    assert "6,000 rows read from 24 files" in outcome.stdout
    assert reweight("combine", tmp_path / "study.toml", "--force", "--quiet").stderr == ""


def test_a_pattern_without_files_is_refused(tmp_path: Path, reweight) -> None:
    (tmp_path / "study.toml").write_text(
        HEAD + '[[run]]\nname = "a"\ntemperature = 300\nfiles = "run*.dat"\n'
    )

    outcome = reweight("combine", tmp_path / "study.toml")

    assert outcome.status == 2
    assert "run[1].files (run 'a') must match at least one file; no name in" in outcome.stderr
    assert "is like 'run*.dat'" in outcome.stderr


def test_a_file_whose_name_looks_like_a_pattern_is_a_file(tmp_path: Path, reweight) -> None:
    for place, name in ((0, "run[1].dat"), (2, "run1.dat")):
        (tmp_path / name).write_text(f"# t E\n{lines(np.arange(3000), energies(place))}")
    (tmp_path / "study.toml").write_text(
        HEAD
        + '[[run]]\ntemperature = 300\nfiles = "run[1].dat"\n[[run]]\ntemperature = 325\nfiles = "run1.dat"\n'
    )

    outcome = reweight("combine", tmp_path / "study.toml")

    assert (outcome.status, outcome.stderr) == (0, "")


def test_rows_replaced_by_a_restart_are_shown(tmp_path: Path, reweight) -> None:
    for place in (0, 2):
        values = energies(place)
        (tmp_path / f"a{place}").write_text(f"# t E\n{lines(np.arange(2000), values[:2000])}")
        (tmp_path / f"b{place}").write_text(f"# t E\n{lines(np.arange(1900, 3000), values[1900:])}")
    (tmp_path / "study.toml").write_text(
        HEAD
        + "".join(
            f'[[run]]\ntemperature = {TEMPERATURES[place]}\nfiles = ["a{place}", "b{place}"]\n'
            for place in (0, 2)
        )
    )

    outcome = reweight("combine", tmp_path / "study.toml")
    ledger = reweight("runs", tmp_path / "study.toml", "--inputs")

    assert outcome.status == 0
    assert "6,200 rows read from 4 files" in outcome.stdout
    assert "200 replaced, 0 dropped" in outcome.stdout
    assert "a0: 100 rows written again by a restart, the later ones kept" in outcome.stdout
    (row,) = [
        line.split() for line in ledger.stdout.splitlines() if line.startswith("a2 ") and "2,000" in line
    ]
    assert row[1] == "2,000"
    assert row[4] == "100"


def test_lines_of_a_log_that_were_skipped_are_shown(tmp_path: Path, reweight) -> None:
    for place in (0, 2):
        text = lines(np.arange(3000), energies(place)).splitlines(keepends=True)
        text.insert(1500, "Checkpoint written\nStep Energy\n")
        (tmp_path / f"log{place}").write_text("Started\nStep Energy\n" + "".join(text) + "Finished\n")
    (tmp_path / "study.toml").write_text(
        HEAD.replace('"E"', '"Energy"').replace('"t"', '"Step"')
        + '[format]\ntable = "Step Energy"\n'
        + "".join(f'[[run]]\ntemperature = {TEMPERATURES[place]}\nfiles = "log{place}"\n' for place in (0, 2))
    )

    outcome = reweight("combine", tmp_path / "study.toml")

    assert outcome.status == 0
    assert (
        "log0: 1 more header inside the file; 3 lines of a log skipped, since they belong to no table"
        in outcome.stdout
    )


def test_replicas_are_regrouped_and_their_walks_shown(tmp_path: Path, reweight) -> None:
    write_replicas(tmp_path)
    (tmp_path / "study.toml").write_text(REPLICAS)

    combine = reweight("combine", tmp_path / "study.toml")
    runs = reweight("runs", tmp_path / "study.nc")
    record = json.loads(reweight("runs", tmp_path / "study.toml", "--json").stdout)

    assert combine.status == 0
    assert "9,000 rows read from 3 files" in combine.stdout
    assert "one common start for the replica exchange" in combine.stdout
    assert runs.stdout.count(" K  ") >= 3
    assert "replica exchange, 3,000 rows of every replica" in runs.stdout
    assert "neighbours [K]" in runs.stdout
    for name in ("replica1", "replica2", "replica3"):
        row = next(line.split() for line in runs.stdout.splitlines() if line.strip().startswith(name))
        assert int(row[1]) in (98, 99, 100)  # around the ladder once in 30 rows
    assert record["replicas"]["temperatures"] == list(TEMPERATURES)
    assert record["replicas"]["residence"] == [pytest.approx([1 / 3] * 3)] * 3
    assert all(0.5 < share < 1 for share in record["replicas"]["acceptance"])
    # 299 steps up of 2999, and none down but from the top to the bottom: each counts half
    assert record["replicas"]["exchanged"] == pytest.approx([299 / 2999 / 2] * 2)
    assert [run["name"] for run in record["runs"]] == ["300 K", "312 K", "325 K"]


def test_files_that_follow_no_replica_have_none(combined: Path, reweight) -> None:
    assert json.loads(reweight("runs", combined, "--json").stdout)["replicas"] is None
    assert "replica" not in reweight("runs", combined).stdout


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            lambda text: text.replace('temperature = "T"\n', ""),
            "columns.temperature must be given, because replicas change",
        ),
        (
            lambda text: text + '[[run]]\ntemperature = 300\nfiles = "x"\n',
            "run must not be given beside [[replica]]",
        ),
        (
            lambda text: text + "[conditions]\nexchange = false\n",
            "conditions.exchange must not be false with replicas",
        ),
        (lambda text: text + "discard = 10\n", "replica[1].discard (run 'replica1')"),
        (
            lambda text: text.replace("replica2.dat", "replica1.dat"),
            "must not be read twice; got 'replica1.dat'",
        ),
        (
            lambda text: text[: text.index("[[replica]]")] + '[[replica]]\nfiles = "replica1.dat"\n',
            "must be several",
        ),
        (lambda text: text[: text.index("[[replica]]")], "run must be given"),
        (
            lambda text: (
                text[: text.index("[[replica]]")] + '[[run]]\ntemperature = 300\nfiles = "replica1.dat"\n'
            ),
            "run[1].temperature must not be given beside columns.temperature = 'T'",
        ),
    ],
)
def test_what_does_not_go_together_with_replicas_is_refused(
    tmp_path: Path, reweight, change, message: str
) -> None:
    write_replicas(tmp_path, 100)
    (tmp_path / "study.toml").write_text(change(REPLICAS))

    outcome = reweight("combine", tmp_path / "study.toml")

    assert outcome.status == 2
    assert message.replace("(run 'replica1')", "").strip() in outcome.stderr


def test_the_output_never_replaces_a_replica_file(tmp_path: Path, reweight) -> None:
    write_replicas(tmp_path)
    (tmp_path / "study.toml").write_text(REPLICAS)
    before = (tmp_path / "replica1.dat").read_bytes()

    outcome = reweight("combine", tmp_path / "study.toml", "-o", tmp_path / "replica1.dat", "--force")

    assert outcome.status == 2
    assert (tmp_path / "replica1.dat").read_bytes() == before


def test_a_study_of_replicas_is_read_again_when_continued(tmp_path: Path, reweight) -> None:
    write_replicas(tmp_path)
    (tmp_path / "study.toml").write_text(REPLICAS)
    assert reweight("combine", tmp_path / "study.toml").status == 0

    outcome = reweight(
        "combine", tmp_path / "study.toml", "--continue", tmp_path / "study.nc", "-o", tmp_path / "b.nc"
    )

    assert outcome.status == 0
    assert (
        "files that hold several temperatures are read as a whole: every file is read again from its start"
        in outcome.stderr
    )
    assert (tmp_path / "b.nc").read_bytes() == (tmp_path / "study.nc").read_bytes()


def test_a_run_of_several_temperatures_may_be_left_out_with_its_reason(tmp_path: Path, reweight) -> None:
    for place in (0, 2):
        temperatures = np.full(3000, TEMPERATURES[place])
        (tmp_path / f"a{place}").write_text(
            f"# t T E\n{lines(np.arange(3000), temperatures, energies(place))}"
        )
    (tmp_path / "study.toml").write_text(
        REPLICAS[: REPLICAS.index("[[replica]]")]
        + '[[run]]\nfiles = "a0"\n[[run]]\nfiles = "a2"\nuse = false\nreason = "another force field"\n'
    )

    outcome = reweight("combine", tmp_path / "study.toml")
    shown = reweight("show", tmp_path / "study.nc")

    assert outcome.status in (0, 3)
    assert "left out: a2 (another force field)" in outcome.stdout
    assert "left out: a2 (another force field)" in shown.stdout
