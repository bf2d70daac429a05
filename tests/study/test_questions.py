"""What a draft leaves open is refused by its name, whatever type the value should have."""

import pytest

from reweight.errors import StudyError
from reweight.study import parse_study

STUDY = """\
schema = 1
energy_unit = "eV"
energy_kind = "potential"

[system]
count = 64
energies_are = "total"

[columns]
energy = "a"

[observables.m]
column = "m"

[[run]]
name = "one"
temperature = 300.0
files = ["one.dat"]
"""


@pytest.mark.parametrize(
    ("line", "asked", "key"),
    [
        ('energy_unit = "eV"', 'energy_unit = "? kJ/mol | eV"', "energy_unit"),
        ('energy_kind = "potential"', 'energy_kind = "? kJ/mol | eV"', "energy_kind"),
        ("count = 64", 'count = "? kJ/mol | eV"', "system.count"),
        ('energies_are = "total"', 'energies_are = "? kJ/mol | eV"', "system.energies_are"),
        ('energy = "a"', 'energy = "? kJ/mol | eV"', "columns.energy"),
        ('column = "m"', 'column = "?kJ/mol|eV"', "observables.m.column"),
        ("temperature = 300.0", 'temperature = "? kJ/mol | eV"', "run[1].temperature"),
    ],
)
def test_an_open_key_is_refused_once_with_its_candidates(line, asked, key):
    assert line in STUDY

    with pytest.raises(StudyError, match=r"must be filled in.*candidates are 'kJ/mol' or 'eV'") as caught:
        parse_study(STUDY.replace(line, asked), folder=".")

    assert caught.value.key == key
    assert "problems" not in str(caught.value)


def test_several_open_keys_are_all_listed():
    text = STUDY.replace('"eV"', '"?"').replace("64", '"?"')

    with pytest.raises(StudyError, match="2 problems") as caught:
        parse_study(text, folder=".")

    assert "energy_unit must be filled in, in place of the question mark; nothing told it" in str(
        caught.value
    )
    assert "system.count must be filled in" in str(caught.value)


def test_texts_and_names_of_files_may_begin_with_a_question_mark():
    text = STUDY.replace("schema = 1", 'schema = 1\ntitle = "? what is this"').replace("one.dat", "?.dat")

    with pytest.raises(StudyError, match=r"run\[1\]\.files.*must match at least one file"):
        parse_study(text, folder=".")  # a question mark in a name of files stands for any one character


def test_a_study_that_nests_without_end_is_refused_as_before():
    with pytest.raises(StudyError, match="is no key of a study file"):
        parse_study(STUDY + f"[{'.'.join('x' * 3000)}]\n", folder=".")
