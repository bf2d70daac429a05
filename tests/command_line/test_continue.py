"""``combine --continue``: the same file as from scratch, in the place of the old one, and a word where more was read."""

from __future__ import annotations

import json
import os
from pathlib import Path

import numpy as np
import pytest

from reweight.datasets.sampling import draw_gamma


def grow(study: Path, name: str = "cold", rows: int = 500) -> None:
    """Append rows to a data file of the study fixture."""
    energies = draw_gamma(30.0, 8.31446261815324e-3 * 300.0, rows, np.random.default_rng(42), coefficient=0.5)
    with (study.parent / f"{name}.dat").open("a") as stream:
        np.savetxt(stream, np.column_stack([np.arange(4000, 4000 + rows), energies]), fmt=["%d", "%.8f"])


def test_the_old_file_is_replaced_by_what_combining_from_scratch_would_write(study, combined, reweight):
    grow(study)

    outcome = reweight("combine", study, "--continue", combined)

    assert outcome.status == 0
    assert outcome.stderr == ""
    assert "8,500 rows read from 2 files" in outcome.stdout
    assert reweight("combine", study, "-o", study.parent / "scratch.nc").status == 0
    assert combined.read_bytes() == (study.parent / "scratch.nc").read_bytes()


def test_another_output_leaves_the_old_file_alone(study, combined, reweight):
    before = combined.read_bytes()
    grow(study)
    target = study.parent / "new.nc"

    assert reweight("combine", study, "--continue", combined, "-o", target).status == 0
    assert combined.read_bytes() == before
    assert target.read_bytes() != before

    again = reweight("combine", study, "--continue", combined, "-o", target)
    assert again.status == 2
    assert "must be a new name" in again.stderr
    assert reweight("combine", study, "--continue", combined, "-o", target, "--force").status == 0


def test_what_is_read_again_is_said_beside_the_answer(study, combined, reweight):
    path = study.parent / "hot.dat"
    path.write_text("# remark\n" + path.read_text())
    said = "run 'hot' is read again from its start: hot.dat has changed in the part that was read before\n"

    outcome = reweight("combine", study, "--continue", combined, "-o", study.parent / "a.nc")
    quiet = reweight("combine", study, "--continue", combined, "-o", study.parent / "b.nc", "--quiet")

    assert (outcome.status, outcome.stderr) == (0, said)
    assert (quiet.status, quiet.stderr) == (0, "")
    assert said.strip() not in outcome.stdout


def test_a_run_outside_that_needs_finer_intervals_is_said_with_the_reason(study, combined, reweight):
    energies = draw_gamma(30.0, 8.31446261815324e-3 * 150.0, 2000, np.random.default_rng(43), coefficient=0.5)
    np.savetxt(
        study.parent / "cold-2.dat", np.column_stack([np.arange(2000), energies]), header="step potential"
    )
    study.write_text(
        study.read_text() + '\n[[run]]\nname = "colder"\ntemperature = 225.0\nfiles = ["cold-2.dat"]\n'
    )

    outcome = reweight("combine", study, "--continue", combined)

    assert outcome.status in (0, 3)
    assert "energies must be kept on intervals of" in outcome.stderr
    assert "every file is read again from its start" in outcome.stderr
    for hidden in ("tally", "node", "panel"):
        assert hidden not in outcome.stderr


@pytest.mark.parametrize(
    ("old", "message"),
    [
        ("gone.nc", "must be a new name"),
        ("missing.nc", "a combined file must exist"),
        ("study.toml", "must be a combined file written by reweight"),
        ("cold.dat", "must be a combined file written by reweight"),
        (".", "is not a file"),
    ],
)
def test_what_is_no_combined_file_is_refused(old, message, study, reweight):
    if old == "gone.nc":  # the output exists and is not the file to be continued
        study.with_suffix(".nc").write_bytes(b"something of worth")
    before = sorted(os.listdir(study.parent))

    outcome = reweight("combine", study, "--continue", study.parent / old)

    assert outcome.status == 2
    assert message in outcome.stderr
    assert outcome.stdout == ""
    assert sorted(os.listdir(study.parent)) == before


def test_a_fault_in_what_is_new_leaves_the_old_file_as_it_was(study, combined, reweight):
    before = combined.read_bytes()
    with (study.parent / "cold.dat").open("a") as stream:
        stream.write("4000 ****\n")

    outcome = reweight("combine", study, "--continue", combined)

    assert outcome.status == 2
    assert "cold.dat, line 4002" in outcome.stderr
    assert combined.read_bytes() == before
    assert not [name for name in os.listdir(study.parent) if name.startswith(".")]


def test_a_file_made_from_runs_in_memory_is_refused(study, lattice_file, reweight):
    outcome = reweight("combine", study, "--continue", lattice_file)

    assert outcome.status == 2
    assert "must be made from a study file" in outcome.stderr


def test_the_record_is_the_one_from_scratch(study, combined, reweight):
    grow(study)
    continued = reweight("combine", study, "--continue", combined, "--json")
    scratch = reweight("combine", study, "--force", "--json")

    assert json.loads(continued.stdout) == json.loads(scratch.stdout)
    first = json.loads(scratch.stdout)["runs"][0]["files"][0]
    assert first["rows_read"] == 4500 == first["kept"] + first["transient"]


def test_blank_lines_are_told_in_every_summary(study, reweight):
    with (study.parent / "hot.dat").open("a") as stream:
        stream.write("\n\n")
    said = "  hot.dat: 2 blank lines skipped"

    combined = study.with_suffix(".nc")
    for command in (("combine", study), ("runs", study), ("runs", combined), ("show", combined)):
        lines = [line.strip() for line in reweight(*command).stdout.splitlines()]
        assert said.strip() in lines, command
    record = json.loads(reweight("runs", combined, "--json").stdout)
    assert [run["files"][0]["blank_lines"] for run in record["runs"]] == [0, 2]
    assert record["left_out"] == []
    assert {each["verdict"] for each in record["findings"]} == {"sound"}


def test_a_clean_study_has_one_line_of_account(combined, reweight):
    shown = reweight("runs", combined).stdout

    assert sum("rows read from" in line for line in shown.splitlines()) == 1
    assert "blank" not in shown
