"""Runs whose temperature stands in a column, and replicas: what a study must and must not say about them."""

from __future__ import annotations

import pytest

from reweight.errors import StudyError
from reweight.study import Study, parse_study

COLUMN = '[columns]\ntemperature = "T"\n'
RUN = '[[run]]\nfiles = "a.dat"\n'
REPLICAS = '[[replica]]\nfiles = "a.dat"\n[[replica]]\nname = "second"\nfiles = ["b.dat", "c.dat"]\n'


def parsed(text: str) -> Study:
    return parse_study(f'schema = 1\nenergy_unit = "reduced"\n{text}', folder=".")


def test_replicas_have_names_and_files_and_make_an_exchange() -> None:
    study = parsed(COLUMN + REPLICAS)

    assert [replica.name for replica in study.replicas] == ["a", "second"]
    assert study.files == ("a.dat", "b.dat", "c.dat")
    assert study.exchange
    assert study.runs == study.used_runs == ()


def test_a_run_without_a_temperature_needs_the_column() -> None:
    assert parsed(COLUMN + RUN).runs[0].temperature is None
    assert not parsed(COLUMN + RUN).exchange
    with pytest.raises(StudyError, match=r"run\[1\].temperature must be given, or beta instead"):
        parsed(RUN)


@pytest.mark.parametrize(
    ("text", "key"),
    [
        ("", "run"),
        (COLUMN + RUN + '[[run]]\nfiles = "b.dat"\nuse = false\n', "run[2].reason"),
        (COLUMN + RUN + "temperature = 1\n", "run[1].temperature"),
        (COLUMN + RUN + "beta = 1\n", "run[1].beta"),
        (COLUMN + RUN + 'discard = "5 ps"\n', "run[1].discard"),
        (REPLICAS, "columns.temperature"),
        (COLUMN + RUN + REPLICAS, "run"),
        (COLUMN + '[[replica]]\nfiles = "a.dat"\n', "replica"),
        (COLUMN + REPLICAS + "discard = 5\n", "replica[1].discard"),
        (COLUMN + REPLICAS + '[[replica]]\nname = "second"\nfiles = "d.dat"\n', "replica[3].name"),
        (COLUMN + REPLICAS + '[[replica]]\nfiles = "b.dat"\n', "replica[3].files"),
        (COLUMN + REPLICAS + "temperature = 1\n", "replica[2].temperature"),
        ("[conditions]\nexchange = false\n" + COLUMN + REPLICAS, "conditions.exchange"),
        ('[columns]\ntemperature = ["T", "U"]\n' + RUN, "columns.temperature"),
        ('[format]\ntable = " "\n' + COLUMN + RUN, "format.table"),
    ],
)
def test_what_does_not_go_together_is_refused_by_its_key(text: str, key: str) -> None:
    with pytest.raises(StudyError) as refused:
        parsed(text)

    assert refused.value.key == key
