"""Patterns in the names of data files: what they match, in which order, and when they are names."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from reweight.errors import StudyError
from reweight.study import Study, parse_study
from reweight.study.patterns import natural_order


def study_of(folder: Path, files: str) -> Study:
    return parse_study(
        f'schema = 1\nenergy_unit = "reduced"\n[[run]]\ntemperature = 1\nfiles = {files}\n', folder=folder
    )


@pytest.mark.parametrize(
    "names",
    [
        ["r1", "r2", "r10"],
        ["9", "10", "a", "b1", "b2c3", "b2c10"],
        ["part0.5", "part0.25", "part1.0"],  # whole numbers count: 0 and 5 before 0 and 25
        ["A2", "a3", "A10"],
    ],
)
def test_numbers_in_names_count_as_numbers(names: list[str]) -> None:
    shuffled = np.random.default_rng(2).permutation(names).tolist()

    assert sorted(shuffled, key=natural_order) == names


def test_a_pattern_stands_for_its_files_in_natural_order(tmp_path: Path) -> None:
    (tmp_path / "sub").mkdir()
    for number in (1, 2, 10):
        (tmp_path / "sub" / f"run{number}.dat").touch()

    study = study_of(tmp_path, '["first.dat", "sub/run*.dat"]')

    files = ("sub/run1.dat", "sub/run2.dat", "sub/run10.dat")
    assert study.runs[0].files == ("first.dat", *files)
    assert study.matched == {"sub/run*.dat": files}
    assert study.files == study.runs[0].files


def test_a_run_is_called_after_the_first_file_matched(tmp_path: Path) -> None:
    (tmp_path / "300K.dat").touch()

    assert study_of(tmp_path, '"3*.dat"').runs[0].name == "300K"


@pytest.mark.parametrize("name", ["a[1].dat", "what?.dat", "*"])
def test_a_file_of_that_name_is_meant_by_it(tmp_path: Path, name: str) -> None:
    (tmp_path / name).touch()
    (tmp_path / "a1.dat").touch()

    study = study_of(tmp_path, f'"{name}"')

    assert study.runs[0].files == (name,)
    assert study.matched == {}


def test_a_pattern_that_matches_nothing_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match=r"run\[1\].files must match at least one file; .* is like 'x\*'"):
        study_of(tmp_path, '"x*"')


def test_a_file_matched_twice_is_refused(tmp_path: Path) -> None:
    (tmp_path / "run1").touch()

    with pytest.raises(StudyError, match="must not be read twice; got 'run1'"):
        study_of(tmp_path, '["run*", "run1"]')


def test_wrong_names_are_refused_as_ever(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match=r"run\[1\].files\[1\] must be a text in quotes; got 1"):
        study_of(tmp_path, "[1, 2]")
