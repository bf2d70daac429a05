"""Everything wrong with a study is said, with the path of its key."""

import re

import pytest

from reweight.errors import StudyError
from reweight.study import parse_study

GOOD_RUN = '[[run]]\nname = "a"\ntemperature = 1.0\nfiles = "a.dat"\n'
GOOD_HEAD = 'schema = 1\nenergy_unit = "reduced"\n'


def refused(text):
    with pytest.raises(StudyError, match="study") as caught:
        parse_study(text, folder=".")
    return caught.value


TOP = [
    ("schema = 2\n", "schema", "must be 1; got 2"),
    ("", "schema", "must be given"),
    ('schema = "1"\n', "schema", "must be 1; got '1'"),
]


@pytest.mark.parametrize(("head", "key", "text"), TOP)
def test_other_schemas_are_refused(head, key, text):
    error = refused(f'{head}energy_unit = "reduced"\n{GOOD_RUN}')
    assert error.key == key
    assert text in str(error)


@pytest.mark.parametrize(
    ("lines", "key", "text"),
    [
        ("title = 3", "title", "must be a text in quotes; got 3"),
        ('temperature_unit = "F"', "temperature_unit", "must be 'K', 'degC' or 'reduced'; got 'F'"),
        ('temperature_unit = "K"', "temperature_unit", '"reduced" together with energy_unit'),
        ('energy_kind = "kinetic"', "energy_kind", "must be 'potential' or 'total'"),
        ('weighting = "equal"', "weighting", "must be 'independent' or 'samples'"),
        ("resolution = 0", "resolution", "must be finite and greater than 0"),
        ("resolution = inf", "resolution", "must be finite and greater than 0"),
        ("tittle = 'x'", "tittle", "is no key of a study file. Did you mean 'title'?"),
        ("count = 3", "count", "is no key of a study file. Did you mean system.count?"),
        ("zzz = 3", "zzz", "is no key of a study file. Known here: columns, conditions"),
        ("system = 3", "system", "must be a table; got 3"),
        ("[system]\ncount = 0", "system.count", "must be greater than 0; got 0"),
        ("[system]\ncount = 2.5", "system.count", "must be a whole number; got 2.5"),
        ("[system]\ncount = true", "system.count", "must be a whole number; got True"),
        ('[system]\nenergies_are = "per atom"', "system.count", "must be given, because energies_are"),
        ('[system]\nenergies_are = "mean"', "system.energies_are", 'must be "total" or "per "'),
        ('[system]\nper = " "', "system.per", "printable text"),
        ("[system]\nlength = -1", "system.length", "must be finite and greater than 0"),
        ('[system]\nstates = "2**256"', "system.states", 'written "base^power", like "2^256"'),
        ('[system]\nstates = "2^-1"', "system.states", 'written "base^power"'),
        ('[system]\nstates = "0^5"', "system.states", 'written "base^power"'),
        ('[system]\nstates = "9^9^9"', "system.states", 'written "base^power"'),
        ("[system]\nground_degeneracy = 0", "system.ground_degeneracy", "must be greater than 0"),
        ('[format]\ndecimal = "x"', "format.decimal", "must be '.' or ','"),
        ('[format]\ndelimiter = "ab"', "format.delimiter", 'must be "blanks", "tab" or one character'),
        ('[format]\ndelimiter = ","\ndecimal = ","', "format.delimiter", "must differ from format.decimal"),
        ('[format]\nthousands = "."\ndecimal = "."', "format.thousands", "must differ from format.decimal"),
        (
            '[format]\nthousands = ","\ndelimiter = ","',
            "format.delimiter",
            "must differ from format.thousands",
        ),
        ('[format]\nthousands = "."\ndelimiter = ","', "format.delimiter", "must differ from format.decimal"),
        ('[format]\nthousands = "x"', "format.thousands", "must be ',', '.', \"'\" or ' '; got 'x'"),
        ("[format]\nlargest_line = 0", "format.largest_line", "must be greater than 0; got 0"),
        ("[format]\nmost_columns = 1.5", "format.most_columns", "must be a whole number; got 1.5"),
        ("[format]\nlargest_expansion = 0", "format.largest_expansion", "must be greater than 0"),
        ("[format]\nlargest_chunk = -1", "format.largest_chunk", "must be greater than 0"),
        ('[system]\nvolumes_are = "per atom"', "system.count", "must be given, because volumes_are"),
        ('[system]\nvolumes_are = "mean"', "system.volumes_are", 'must be "total" or "per "'),
        ("[conditions]\npressure = 1", "conditions.pressure", "must be a text in quotes; got 1"),
        (
            '[conditions]\npressure = "bar"',
            "conditions.pressure",
            'must be a number and a unit, like "1 bar"',
        ),
        ('[conditions]\npressure = "1"', "conditions.pressure", "must be a number and a unit"),
        ('[conditions]\npressure = "1 kJ"', "conditions.pressure", "must be a pressure; got 'kJ'"),
        (
            '[conditions]\npressure = "1 baar"',
            "conditions.pressure",
            "must be made of known units; got 'baar'",
        ),
        ('[columns]\nvolume_unit = "nm^2"', "columns.volume_unit", "must be a volume; got 'nm^2'"),
        ('[columns]\nvolume = ["V", 1]', "columns.volume", "must be one column; got ['V', 1]"),
        (
            "[conditions]\ndegrees_of_freedom = -1",
            "conditions.degrees_of_freedom",
            "must be at least 0; got -1",
        ),
        ('[format]\nencoding = "nope"', "format.encoding", 'must be a known encoding like "utf-8"'),
        ('[format]\ncomment = [""]', "format.comment", "must hold what begins a comment line"),
        ("[format]\nheader = 1", "format.header", "must be true or false"),
        ("[columns]\nenergy = 0", "columns.energy", "position counted from 1; got 0"),
        ("[columns]\nenergy = true", "columns.energy", "position counted from 1; got True"),
        ("[columns]\nenergy = []", "columns.energy", "each column to be summed once; got []"),
        ("[columns]\nenergy = [1, 1]", "columns.energy", "each column to be summed once"),
        ("[columns]\nenergy = 1.5", "columns.energy", "position counted from 1; got 1.5"),
        ('[columns]\ntime = "t"', "columns.time_unit", "must be given, because columns.time is"),
        ('[columns]\ntime_unit = "ps"', "columns.time", "must be given, because columns.time_unit is"),
        ('[columns]\ntime = ["t", 1]\ntime_unit = "ps"', "columns.time", "must be one column; got ['t', 1]"),
        ('[columns]\ntime = 0\ntime_unit = "ps"', "columns.time", "position counted from 1; got 0"),
        (
            '[columns]\ntime = 1\ntime_unit = "kJ"',
            "columns.time_unit",
            "must be a time, or one of step, sweep",
        ),
        ('[columns]\ntime = 1\ntime_unit = "pss"', "columns.time_unit", "Use a unit like ps, ns, step"),
        ("[conditions]\nexchange = 1", "conditions.exchange", "must be true or false; got 1"),
        ("[observables.m]\nunit = '1'", "observables.m.column", "must be given"),
        (
            "[observables.m]\ncolumn = 1\nunit = 'a b/'",
            "observables.m.unit",
            "product of powers of unit names",
        ),
        (
            "[observables.m]\ncolumn = 1\nis = 'mean'",
            "observables.m.is",
            "must be 'total', 'per site' or 'plain'",
        ),
        ("[observables.m]\ncolumn = 1\nmoments = [0]", "observables.m.moments", "whole numbers from 1 to 8"),
        ("[observables.m]\ncolumn = 1\nmoments = [9]", "observables.m.moments", "whole numbers from 1 to 8"),
        ("[observables.m]\ncolumn = 1\nmoments = []", "observables.m.moments", "whole numbers from 1 to 8"),
        (
            "[observables.m]\ncolumn = 1\nmoments = [true]",
            "observables.m.moments",
            "whole numbers from 1 to 8",
        ),
        ("[observables.energy]\ncolumn = 1", "observables.energy", 'not "energy"'),
        ('[observables."a b"]\ncolumn = 1', "observables.a b", "must be named with letters"),
        ("[observables.größe]\ncolumn = 1".replace("größe", '"größe"'), "observables.größe", "must be named"),
        ("[observables.m]\ncolumn = 1\nabove = inf", "observables.m.above", "must be finite; got inf"),
        (
            "[observables.m]\ncolumn = 1\nabove = 'high'",
            "observables.m.above",
            "must be a number; got 'high'",
        ),
        ("[observables.m]\ncolumm = 1\ncolumn = 1", "observables.m.columm", "Did you mean 'column'?"),
    ],
)
def test_wrong_value_is_refused_with_its_key(lines, key, text):
    error = refused(f"{GOOD_HEAD}{lines}\n{GOOD_RUN}")
    assert error.key == key
    assert f"study: {key}" in str(error)
    assert text in str(error)


@pytest.mark.parametrize(
    ("lines", "key", "text"),
    [
        ("files = 'b'", "temperature", "but not both; got neither"),
        ("files = 'b'\ntemperature = 1\nbeta = 1", "temperature", "but not both; got both"),
        ("files = 'b'\ntemperature = 0", "temperature", "must lie above absolute zero; got 0"),
        ("files = 'b'\ntemperature = -3.0", "temperature", "must lie above absolute zero; got -3.0"),
        ("files = 'b'\ntemperature = nan", "temperature", "must be a number; got nan"),
        ("files = 'b'\ntemperature = -inf", "temperature", "must be a number; got -inf"),
        ("files = 'b'\ntemperature = 'inf'", "temperature", "must be a number; got 'inf'"),
        ("files = 'b'\ntemperature = 1e-320", "temperature", "must be large enough"),
        ("files = 'b'\nbeta = -1", "beta", "must be finite and not negative; got -1"),
        ("files = 'b'\nbeta = inf", "beta", "must be finite and not negative; got inf"),
        ("temperature = 1", "files", "must be given"),
        ("temperature = 1\nfiles = []", "files", "must hold names of files"),
        ("temperature = 1\nfiles = ['']", "files", "must hold names of files"),
        ("temperature = 1\nfiles = [3]", "files[1]", "must be a text in quotes; got 3"),
        ("temperature = 1\nfiles = ['b', 'b']", "files", "must not be read twice; got 'b', listed in run[2]"),
        (
            "name = 'b'\ntemperature = 1\nfiles = ['./a.dat']",
            "files",
            "must not be read twice; got './a.dat', listed in run[1]",
        ),
        ("temperature = 1\nfiles = 'x/a.gz'", "name", "must be unique; got 'a', as for run[1]"),
        ("temperature = 1\nfiles = 'b'\nuse = false", "reason", "must say why the run is left out"),
        ("temperature = 1\nfiles = 'b'\nuse = false\nreason = ' '", "reason", "must say why"),
        ("temperature = 1\nfiles = 'b'\nuse = 'no'", "use", "must be true or false"),
        ("temperature = 1\nfiles = 'b'\ndiscard = -1", "discard", 'must be "auto", a number of rows'),
        ("temperature = 1\nfiles = 'b'\ndiscard = true", "discard", 'must be "auto", a number of rows'),
        ("temperature = 1\nfiles = 'b'\ndiscard = '100 %'", "discard", "percentage below 100"),
        ("temperature = 1\nfiles = 'b'\ndiscard = '20 sheep'", "discard", "known units; got 'sheep'"),
        ("temperature = 1\nfiles = 'b'\ndiscard = '20 kJ'", "discard", "must be a time, or one of step"),
        (
            "temperature = 1\nfiles = 'b'\ndiscard = '20 ns'",
            "discard",
            "as a time ('20 ns') needs a clock: name the column of times and its unit under [columns], "
            'time = "t" and time_unit = "ps"',
        ),
        ("temperature = 1\nfiles = 'b'\ntemprature = 2", "temprature", "Did you mean 'temperature'?"),
    ],
)
def test_wrong_value_in_a_run_is_refused_with_the_number_of_the_run(lines, key, text):
    error = refused(f"{GOOD_HEAD}{GOOD_RUN}[[run]]\n{lines}\n")
    assert error.key == f"run[2].{key}"
    assert text in str(error)


@pytest.mark.parametrize("name", ["", " ", "a/b", ".", "..", "a\\u0007", " a"])
def test_unusable_names_are_refused(name):
    error = refused(f'{GOOD_HEAD}[[run]]\nname = "{name}"\ntemperature = 1\nfiles = "a"\n')
    assert error.key == "run[1].name"


def test_name_of_the_run_is_said():
    error = refused(f'{GOOD_HEAD}[[run]]\nname = "640K"\ntemperature = -1\nfiles = "a"\n')
    assert "run[1].temperature (run '640K') must lie above absolute zero; got -1" in str(error)


def test_celsius_temperatures_may_be_negative_but_not_below_absolute_zero():
    head = 'schema = 1\nenergy_unit = "eV"\ntemperature_unit = "degC"\n'
    parse_study(f'{head}[[run]]\ntemperature = -10\nfiles = "a"\n', folder=".")
    error = refused(f'{head}[[run]]\ntemperature = -274\nfiles = "a"\n')
    assert "absolute zero (-273.15 degC); got -274" in str(error)


def test_at_least_one_run_is_needed():
    assert refused(GOOD_HEAD).key == "run"
    assert refused(f"{GOOD_HEAD}run = []\n").key == "run"
    error = refused(f"{GOOD_HEAD}{GOOD_RUN}use = false\nreason = 'bad'\n")
    assert "at least one run with use = true" in str(error)


@pytest.mark.parametrize(
    ("lines", "key"),
    [
        ("[observables.m]\ncolumn = 1\nbins = [0.0, 1.0, 50]", "observables.m.bins"),
        ("[report]\nauthor = 'x'", "report"),
    ],
)
def test_keys_of_later_features_are_refused_by_name(lines, key):
    error = refused(f"{GOOD_HEAD}{lines}\n{GOOD_RUN}")
    assert error.key == key
    assert f"{key} is known but this version cannot use it yet; remove it." in str(error)


def test_a_start_in_a_unit_that_the_clock_does_not_know_is_refused():
    clock = '[columns]\ntime = 1\ntime_unit = "sweep"\n'
    error = refused(f"{GOOD_HEAD}{clock}{GOOD_RUN}discard = '20 ns'\n")
    assert error.key == "run[1].discard"
    assert "must be a time of the study's clock; got '20 ns'" in str(error)


def test_later_keys_at_the_value_that_asks_for_nothing_are_fine():
    parse_study(f"{GOOD_HEAD}[conditions]\nexchange = false\ndegrees_of_freedom = 0\n{GOOD_RUN}", folder=".")


def test_all_problems_are_listed_at_once():
    error = refused(
        'schema = 1\nenergy_unit = "eW"\n[system]\ncount = -1\n[report]\nauthor = "x"\n'
        '[[run]]\nname = "x"\ntemperature = "hot"\nfiles = []\n'
    )
    assert str(error).startswith("study has 5 problems:\n")
    found = re.findall(r"^  (\S+)", str(error), flags=re.MULTILINE)
    assert found == [
        "report",
        "energy_unit",
        "system.count",
        "run[1].files",
        "run[1].temperature",
    ]
    assert error.key == "report"


@pytest.mark.parametrize("hostile", ["two\\nlines", "a\\u202eb", "red \\u001b[31m"])
def test_a_title_that_could_disturb_a_screen_is_refused(hostile):
    text = f'schema = 1\ntitle = "{hostile}"\nenergy_unit = "eV"\n[[run]]\ntemperature = 300.0\nfiles = "a.dat"\n'
    with pytest.raises(StudyError, match=r"title .*one line of printable text"):
        parse_study(text, folder=".")


PRESSURE = '[conditions]\npressure = "1 bar"\n'
VOLUME = '[columns]\nenergy = "E"\nvolume = "V"\n'
KELVIN_RUN = '[[run]]\nname = "a"\ntemperature = 300.0\nfiles = "a.dat"\n'


@pytest.mark.parametrize(
    ("lines", "missing"),
    [
        (PRESSURE, ["columns.volume", "columns.volume_unit"]),
        (VOLUME, ["conditions.pressure", "columns.volume_unit"]),
        (VOLUME + 'volume_unit = "nm^3"\n', ["conditions.pressure"]),
        (PRESSURE + VOLUME, ["columns.volume_unit"]),
    ],
)
def test_pressure_volume_and_its_unit_are_given_together_or_not_at_all(lines, missing):
    error = refused(f'schema = 1\nenergy_unit = "eV"\n{lines}{KELVIN_RUN}')
    assert error.key == missing[0]
    for key in missing:
        assert f"{key} must be given, because " in str(error)
    assert "for runs at constant volume give none of them" in str(error)


@pytest.mark.parametrize(
    ("head", "pressure", "unit"),
    [('energy_unit = "eV"', "1 bar", "reduced"), ('energy_unit = "reduced"', "1 bar", "nm^3")],
)
def test_pressures_that_do_not_go_with_the_other_units_are_refused(head, pressure, unit):
    run = KELVIN_RUN
    error = refused(
        f'schema = 1\n{head}\n[conditions]\npressure = "{pressure}"\n{VOLUME}volume_unit = "{unit}"\n{run}'
    )
    assert error.key == "conditions.pressure"
    assert "must be 'reduced' all or none" in str(error)


def test_a_number_of_states_at_constant_pressure_is_refused():
    error = refused(
        f'schema = 1\nenergy_unit = "eV"\n[system]\nstates = "2^8"\n{PRESSURE}{VOLUME}volume_unit = "nm^3"\n{KELVIN_RUN}'
    )
    assert error.key == "system.states"
    assert "their number is not finite" in str(error)


def test_a_kinetic_part_is_not_added_to_energies_that_have_it():
    error = refused(
        f'schema = 1\nenergy_unit = "eV"\nenergy_kind = "total"\n[conditions]\ndegrees_of_freedom = 12\n{KELVIN_RUN}'
    )
    assert error.key == "conditions.degrees_of_freedom"
    assert 'must not be given with energy_kind = "total"' in str(error)
    assert "would count twice; got 12" in str(error)


@pytest.mark.parametrize("temperature", [25.0, -10.0, 199.0])
def test_temperatures_that_may_be_degrees_celsius_need_a_unit(temperature):
    text = 'schema = 1\nenergy_unit = "kJ/mol"\n{}[[run]]\ntemperature = {}\nfiles = "a"\n'
    error = refused(text.format("", temperature))
    assert error.key == "temperature_unit"
    assert f"may be kelvin or degrees Celsius; got {temperature:g}." in str(error)
    assert 'Write temperature_unit = "K" or "degC"' in str(error)
    declared = parse_study(text.format('temperature_unit = "degC"\n', temperature), folder=".")
    assert declared.temperature_unit == "degC"
