"""Temperatures from every place that may tell them."""

import numpy as np
import pytest

from reweight.drafting.guess import Sureness
from reweight.drafting.look import look_at
from reweight.drafting.temperatures import guess_temperature

ROWS = np.column_stack([np.arange(50), np.sin(np.arange(50.0))])


def guessed(path, header="step energy", remark="", extra=None):
    path.parent.mkdir(parents=True, exist_ok=True)
    table = ROWS if extra is None else np.column_stack([ROWS, extra])
    np.savetxt(path, table, header=f"{remark}\n{header}" if remark else header)
    return guess_temperature(look_at(path))


@pytest.mark.parametrize(
    ("name", "key", "value"),
    [
        ("300K.dat", "temperature", 300.0),
        ("run_T_2.30", "temperature", 2.3),
        ("T2.269.dat.gz", "temperature", 2.269),
        ("temp310.csv", "temperature", 310.0),
        ("beta0.44.dat", "beta", 0.44),
        ("beta=0.4407_L16.txt", "beta", 0.4407),
        ("310.15K/run.dat", "temperature", 310.15),
        ("T_2.5/a/run.dat", "temperature", 2.5),
    ],
)
def test_a_name_tells_a_temperature(tmp_path, name, key, value):
    found = guessed(tmp_path / name)

    assert (found.key, found.guess.value, found.guess.sureness) == (key, value, Sureness.LIKELY)


@pytest.mark.parametrize("name", ["run1.dat", "batch2.dat", "12K4.dat", "melt300.dat", "t1.dat"])
def test_other_numbers_in_names_are_no_temperatures(tmp_path, name):
    found = guessed(tmp_path / name)

    assert found.guess.sureness is Sureness.DOUBTFUL
    assert found.guess.candidates == ()


@pytest.mark.parametrize(
    ("remark", "key", "value", "unit"),
    [
        ("T = 300 K", "temperature", 300.0, "K"),
        ("Temperature: 2.5", "temperature", 2.5, ""),
        ("reference temperature [K] 298.15", "temperature", 298.15, "K"),
        ("temperature = 25 degC", "temperature", 25.0, "degC"),
        ("beta = 0.4", "beta", 0.4, ""),
    ],
)
def test_a_remark_tells_a_temperature(tmp_path, remark, key, value, unit):
    found = guessed(tmp_path / "run.dat", remark=remark)

    assert (found.key, found.guess.value, found.unit) == (key, value, unit)
    assert found.guess.sureness is Sureness.LIKELY


def test_a_constant_column_is_certain(tmp_path):
    found = guessed(tmp_path / "run.dat", header="step energy T[K]", extra=np.full(50, 305.5))

    assert (found.guess.value, found.guess.sureness, found.unit) == (305.5, Sureness.CERTAIN, "K")


def test_two_places_that_agree_are_certain_and_the_finer_one_counts(tmp_path):
    found = guessed(tmp_path / "T_2.27.dat", remark="T = 2.2691853")

    assert (found.guess.value, found.guess.sureness) == (2.2691853, Sureness.CERTAIN)


def test_two_places_that_disagree_are_doubtful(tmp_path):
    found = guessed(tmp_path / "310K.dat", remark="T = 320 K")

    assert found.guess.value is None
    assert found.guess.candidates == (320.0, 310.0)


def test_a_column_against_the_name_is_doubtful(tmp_path):
    found = guessed(tmp_path / "310K.dat", header="step energy T[K]", extra=np.full(50, 300.0))

    assert found.guess.candidates == (300.0, 310.0)


def test_a_thermostats_value_is_not_taken_for_what_was_set(tmp_path):
    fluctuating = np.random.default_rng(1).normal(300.0, 3.0, 50)

    named = guessed(tmp_path / "300K.dat", header="step energy Temp[K]", extra=fluctuating)
    unnamed = guessed(tmp_path / "run.dat", header="step energy Temp[K]", extra=fluctuating)
    contradicted = guessed(tmp_path / "350K.dat", header="step energy Temp[K]", extra=fluctuating)

    assert named.guess.value == 300.0
    assert unnamed.guess.value is None
    assert "fluctuates about 300" in unnamed.guess.why or "fluctuates about 299" in unnamed.guess.why
    assert contradicted.guess.candidates == (350.0,)
