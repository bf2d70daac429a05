"""What a study file may say, and what it then means."""

import math

import pytest
import scipy.constants

from reweight.errors import StudyError
from reweight.study import load_study, parse_study

WHOLE = """
schema = 1
title = "Ordering of an alloy"
energy_unit = "eV"
temperature_unit = "K"
energy_kind = "total"
weighting = "samples"
resolution = 0.5
[system]
count = 2048
per = "atom"
energies_are = "per atom"
length = 16
dimension = 2
states = "2^256"
ground_degeneracy = 2
[conditions]
degrees_of_freedom = 0
exchange = true
[format]
delimiter = "tab"
decimal = ","
comment = "!"
header = false
encoding = "latin-1"
[columns]
energy = ["bonded", 3]
[observables.order]
column = "m"
unit = "nm"
is = "per atom"
moments = [4, 1, 2]
absolute = true
above = 0.6
[observables.area]
column = 5
[[run]]
name = "cold"
temperature = 640
files = "640K.dat"
discard = 500
[[run]]
beta = 0.5
files = ["hot/660K.dat.gz", "/elsewhere/more.dat"]
discard = "10 %"
use = false
reason = "wrong pressure"
"""


def study_of(extra="", *, run='temperature = 1.0\nfiles = "a.dat"', head='energy_unit = "reduced"'):
    return parse_study(f"schema = 1\n{head}\n{extra}\n[[run]]\n{run}\n", folder=".")


def test_every_key_is_kept():
    study = parse_study(WHOLE, folder="/data")
    assert (study.energy_kind, study.weighting, study.resolution) == ("total", "samples", 0.5)
    assert (study.system.count, study.system.per, study.system.energy_multiplier) == (2048, "atom", 2048)
    assert (study.system.length, study.system.dimension, study.system.ground_degeneracy) == (16, 2, 2)
    assert study.format.model_dump() == {
        "delimiter": "\t",
        "decimal": ",",
        "comment": ("!",),
        "header": False,
        "encoding": "latin-1",
        "thousands": None,
        "table": None,
        "largest_line": 1_000_000,
        "most_columns": 10_000,
        "largest_expansion": None,
        "largest_chunk": 1 << 28,
    }
    assert study.conditions.exchange is True
    assert study.columns.energy == ("bonded", 3)
    assert list(study.observables) == ["order", "area"]
    order, area = study.observables.values()
    assert (order.column, order.unit, order.normalisation) == (("m",), "nm", "per site")
    assert (order.moments, order.absolute, order.above) == ((1, 2, 4), True, 0.6)
    assert (area.column, area.unit, area.normalisation) == ((5,), "1", "plain")
    assert (area.moments, area.absolute, area.above) == ((1,), False, None)
    assert [run.name for run in study.runs] == ["cold", "660K"]
    assert [run.name for run in study.used_runs] == ["cold"]
    assert study.text == WHOLE


def test_defaults_ask_for_nothing_special():
    study = study_of()
    assert (study.temperature_unit, study.energy_kind, study.weighting) == (
        "reduced",
        "potential",
        "independent",
    )
    assert (study.resolution, study.title, study.path) == (None, "", None)
    assert study.system.log_states is None
    assert study.system.energy_multiplier == 1
    assert (study.runs[0].name, study.runs[0].discard, study.runs[0].use) == ("a", "auto", True)


def test_files_are_relative_to_the_study_file(tmp_path):
    (tmp_path / "study.toml").write_text(WHOLE, encoding="utf-8-sig")
    study = load_study(tmp_path / "study.toml")
    assert (study.path, study.folder, study.text) == (tmp_path / "study.toml", tmp_path, WHOLE)
    assert str(study.data_path("hot/660K.dat.gz")) == str(tmp_path / "hot/660K.dat.gz")
    assert str(study.data_path("/elsewhere/more.dat")) == "/elsewhere/more.dat"


def test_number_of_states_is_kept_as_a_logarithm():
    study = study_of('[system]\nstates = "2 ^ 1048576"')
    assert study.system.log_states == pytest.approx(1048576 * math.log(2), rel=1e-15)


@pytest.mark.parametrize(
    ("head", "run", "beta"),
    [
        ('energy_unit = "reduced"', "temperature = 2.0", 0.5),
        ('energy_unit = "reduced"', "beta = 0.4407", 0.4407),
        ('energy_unit = "reduced"', "beta = 0", 0.0),
        ('energy_unit = "reduced"', "temperature = inf", 0.0),
        # 1 / (k_B 300 K) = 0.400907850142 mol/kJ: exact SI constants (2019), 12 digits
        ('energy_unit = "kJ/mol"', "temperature = 300", 0.400907850142),
        ('energy_unit = "kJ/mol"\ntemperature_unit = "degC"', "temperature = 26.85", 0.400907850142),
        ('energy_unit = "K"', "temperature = 4", 0.25),
    ],
)
def test_inverse_temperature_is_in_the_energy_unit(head, run, beta):
    study = study_of(head=head, run=f'{run}\nfiles = "a.dat"')
    assert study.runs[0].beta(study) == pytest.approx(beta, rel=2e-12)


def test_boltzmann_constant_is_that_of_the_energy_unit():
    study = study_of(head='energy_unit = "eV"\ntemperature_unit = "K"')
    assert study.boltzmann_constant == pytest.approx(scipy.constants.k / scipy.constants.e, rel=1e-14)


@pytest.mark.parametrize("discard", ['"20 ns"', '"0.5 ps"', '"3 µs"', '"20ns"'])
def test_a_start_may_be_a_time_if_there_is_a_clock(discard):
    study = study_of(
        '[columns]\ntime = "t"\ntime_unit = "ps"', run=f'temperature = 1\nfiles = "a"\ndiscard = {discard}'
    )
    assert (study.columns.time, study.columns.time_unit) == (("t",), "ps")
    assert study.runs[0].discard == discard.strip('"')


@pytest.mark.parametrize("unit", ["step", "sweep", "reduced"])
def test_a_clock_may_count(unit):
    study = study_of(
        f'[columns]\ntime = 1\ntime_unit = "{unit}"',
        run=f'temperature = 1\nfiles = "a"\ndiscard = "500 {unit}"',
    )
    assert study.columns.time_unit == unit


def test_studies_cannot_be_changed():
    study = study_of()
    with pytest.raises(ValueError, match="frozen"):
        study.title = "x"


@pytest.mark.parametrize(
    ("raw", "message"),
    [
        (b"schema = 1\ntitle = oops\n", r"must be TOML; .*line 2"),
        (b"schema = 1\nschema = 1\n", r"must be TOML; .*line 2"),
        (b"schema = 1\ntitle = '\xff'\n", r"must be UTF-8 text; got byte 0xff \(line 2\)"),
        (b"x = " + b"[" * 100_000, "must not nest|must be TOML"),
        (b"# " + b"x" * 4_000_000, "must not be longer"),
    ],
)
def test_text_that_is_no_toml_is_refused_with_file_and_line(tmp_path, raw, message):
    (tmp_path / "study.toml").write_bytes(raw)
    with pytest.raises(StudyError, match=rf"study file '.*study.toml' {message}"):
        load_study(tmp_path / "study.toml")


@pytest.mark.parametrize("name", ["missing.toml", "."])
def test_missing_study_file_or_folder_is_refused(tmp_path, name):
    with pytest.raises(StudyError, match="must be readable; the system says"):
        load_study(tmp_path / name)


@pytest.mark.parametrize("file", ["a/640K.dat", "640K.dat.gz", "640K.dat.bz2", "640K.dat.xz", "640K"])
def test_a_run_without_a_name_is_called_after_its_first_file(file):
    assert study_of(run=f'temperature = 1.0\nfiles = ["{file}", "b.dat"]').runs[0].name == "640K"
