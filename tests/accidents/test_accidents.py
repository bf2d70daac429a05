"""Every accident file has the outcome that the table of the documentation promises."""

from __future__ import annotations

import json
import os
import shutil

import pytest
from accidents.corpus import ACCIDENTS, FILE_NAMES, GUIDE_PAGE, broken_promise, guide_page

CASES = {each.what: each for cases in ACCIDENTS.values() for each in cases}


def test_there_are_at_least_sixty_accidents_and_no_two_of_a_name():
    assert len(CASES) == sum(len(cases) for cases in ACCIDENTS.values()) >= 60


def test_the_table_of_the_documentation_is_made_of_the_cases():
    assert GUIDE_PAGE.read_text("utf-8") == guide_page()


@pytest.mark.parametrize("what", CASES)
def test_an_accident_has_its_one_outcome(what, study, reweight):
    case = CASES[what]
    case.spoil(study.parent)
    before = sorted(study.parent.iterdir())

    outcome = reweight("combine", study)

    wrote = sorted(study.parent.iterdir()) != before
    assert not broken_promise(case, outcome.status, outcome.stdout, outcome.stderr, wrote=wrote)


def test_names_of_files_are_data_and_are_shown_as_a_terminal_can_show_them(study, reweight):
    for name in FILE_NAMES:
        shutil.copy(study.parent / "hot.dat", study.parent / name)
        with study.open("a") as text:
            text.write(f'[[run]]\nname = "{len(name)} {ascii(name).encode().hex()}"\ntemperature = 330.0\n')
            text.write(f"files = [{json.dumps(name)}]\n")
    before = {*os.listdir(study.parent), "study.nc"}

    outcome = reweight("combine", study)

    assert outcome.status == 0, outcome.stderr
    assert f"{600 * (2 + len(FILE_NAMES)):,} rows read" in outcome.stdout
    assert set(os.listdir(study.parent)) == before  # no shell has seen a name
    listed = reweight("runs", study.with_suffix(".nc"), "--inputs")
    assert all(line.isprintable() for line in listed.stdout.split("\n"))
    assert r"new\nline.dat" in listed.stdout
    assert r"right\u202eto left.dat" in listed.stdout


@pytest.mark.parametrize("name", FILE_NAMES, ids=ascii)
def test_the_name_of_a_damaged_file_is_shown_as_a_terminal_can_show_it(name, study, reweight):
    (study.parent / name).write_text("# step potential\n1 nan\n")
    study.write_text(study.read_text().replace('"cold.dat"', json.dumps(name)))

    outcome = reweight("combine", study)

    assert outcome.status == 2
    (line,) = outcome.stderr.splitlines()
    assert line.isprintable()
    assert "line 2: column 'potential' must hold finite numbers; got 'nan'" in line


@pytest.mark.parametrize(
    "name", ["--force.nc", "new\nline.nc", "right\u202eto left.nc", "$(touch owned).nc"], ids=ascii
)
def test_an_output_may_have_any_name(name, study, reweight, monkeypatch):
    monkeypatch.chdir(study.parent)
    outcome = reweight("combine", study, "-o", f"./{name}")
    assert outcome.status == 0, outcome.stderr
    assert all(line.isprintable() for line in outcome.stdout.split("\n"))
    assert os.path.isfile(name)
    assert not os.path.exists("owned")
