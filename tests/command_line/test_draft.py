"""``reweight draft``: what it prints, what it writes, and what it refuses."""

from __future__ import annotations

import shutil
import tomllib
from pathlib import Path

import pytest

from reweight.study import load_study


@pytest.fixture
def data(study: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to work in, with two files whose names tell their temperatures."""
    folder = study.parent
    (folder / "cold.dat").rename(folder / "300K.dat")
    (folder / "hot.dat").rename(folder / "330K.dat")
    study.unlink()
    monkeypatch.chdir(folder)
    return folder


def test_clean_files_are_drafted_and_combine_at_once(data, reweight):
    drafted = reweight("draft", "300K.dat", "330K.dat")

    assert (drafted.status, drafted.stderr) == (0, "")
    assert "energy_unit          kJ/mol     certain" in drafted.stdout
    assert "300K.dat  4,000  300          likely    the name of the file" in drafted.stdout
    assert drafted.stdout.endswith("wrote study.toml; next: reweight combine study.toml\n")
    assert reweight("combine", "study.toml").status == 0


def test_what_is_doubtful_is_refused_by_combine_by_name_with_its_candidates(data, reweight):
    for name in ("300K.dat", "330K.dat"):
        path = data / name
        path.write_text(path.read_text().replace("potential[kJ/mol]", "energy"))

    drafted = reweight("draft", "300K.dat", "330K.dat")
    combined = reweight("combine", "study.toml")

    assert drafted.status == 0
    assert "fill in energy_unit, energy_kind there" in drafted.stdout
    assert combined.status == 2
    assert (
        "energy_unit must be filled in, in place of the question mark; the candidates are 'kJ/mol' or"
        in combined.stderr
    )
    assert "energy_kind must be filled in, in place of the question mark" in combined.stderr
    assert not (data / "study.nc").exists()


def test_an_existing_study_is_kept_unless_asked(data, reweight):
    (data / "study.toml").write_text("mine")

    refused = reweight("draft", "300K.dat", "330K.dat")

    assert refused.status == 2
    assert "a file of that name exists" in refused.stderr
    assert (data / "study.toml").read_text() == "mine"
    assert reweight("draft", "300K.dat", "330K.dat", "--force").status == 0
    assert load_study(data / "study.toml").energy_unit == "kJ/mol"


def test_a_data_file_is_never_written_over(data, reweight):
    before = (data / "300K.dat").read_bytes()

    outcome = reweight("draft", "300K.dat", "330K.dat", "-o", "300K.dat", "--force")

    assert outcome.status == 2
    assert "must not replace an input" in outcome.stderr
    assert (data / "300K.dat").read_bytes() == before


def test_systems_become_studies_and_all_or_none_is_written(data, reweight):
    for name in ("300K.dat", "330K.dat"):
        shutil.copy(data / name, data / f"L8_{name}")
        shutil.copy(data / name, data / f"L16_{name}")
    files = sorted(data.glob("L*.dat"))
    (data / "my-L8.toml").write_text("mine")

    refused = reweight("draft", *files, "-o", "my.toml")
    assert refused.status == 2
    assert sorted(each.name for each in data.glob("*.toml")) == ["my-L8.toml"]

    (data / "my-L8.toml").unlink()
    done = reweight("draft", *files, "-o", "my.toml")
    assert done.status == 0
    assert sorted(each.name for each in data.glob("*.toml")) == ["my-L16.toml", "my-L8.toml"]
    assert load_study(data / "my-L8.toml").system.length == 8


HOSTILE = [
    "300K \"quoted\" 'twice'.dat",
    "300K $(touch owned) `touch owned`; touch owned.dat",
    "300K\nline = 1.dat",
    "300K\u202etad.dat",
    "300K\x1b[31m.dat",
    "300K ''' \"\"\" \\U0001.dat",
    "-300K.dat",
    "--force 300K.dat",
    "300K [1]*?.dat",
    "300K # no comment.dat",
    " 300K .dat",
]


@pytest.mark.parametrize("name", HOSTILE, ids=ascii)
def test_a_name_of_a_file_is_data(data, reweight, name):
    (data / "300K.dat").rename(data / name)

    drafted = reweight("draft", "--", name, "330K.dat")
    text = (data / "study.toml").read_text(encoding="utf-8")
    combined = reweight("combine", "study.toml")

    assert drafted.status == 0
    assert drafted.stdout.replace("\n", "").isprintable()
    assert text.replace("\n", "").isprintable()
    assert tomllib.loads(text)["run"][0]["files"] == [name]
    assert combined.status == 0, combined.stderr
    assert combined.stdout.replace("\n", "").isprintable()
    assert not (data / "owned").exists()


def test_what_a_file_says_is_data(data, reweight):
    """Names of columns and remarks that would end a string, a line or a table of the study."""
    head = (data / "300K.dat").read_text().splitlines(keepends=True)
    bad = "step potential[kJ/mol] x\"]\x1b[31m\u202e'''=1"
    rows = [f"{line.rstrip()} {number}.5\n" for number, line in enumerate(head[1:])]
    (data / "300K.dat").write_text(f'# [run]\u2028"""\n# {bad}\n' + "".join(rows))

    outcome = reweight("draft", "300K.dat")

    assert outcome.status == 0
    assert outcome.stdout.replace("\n", "").isprintable()
    assert load_study(data / "study.toml").columns.energy == ("potential",)
    assert reweight("combine", "study.toml").status == 0


def test_a_name_that_is_no_text_is_refused(data, reweight):
    (data / "300K.dat").rename(data / "300K\udcff.dat")

    outcome = reweight("draft", "300K\udcff.dat", "330K.dat")

    assert outcome.status == 2
    assert "must be UTF-8" in outcome.stderr
    assert not (data / "study.toml").exists()


def test_no_file_is_a_usage_error(data, reweight):
    outcome = reweight("draft")

    assert outcome.status == 2
    assert "Missing argument 'FILES...'" in outcome.stderr


def test_quiet_says_only_what_is_left_to_do(data, reweight):
    outcome = reweight("draft", "300K.dat", "330K.dat", "--quiet")

    assert outcome.stdout == "wrote study.toml; next: reweight combine study.toml\n"
