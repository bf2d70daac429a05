"""What one unit of the files' volumes is worth at the declared pressure, in the study's energy unit."""

import pytest

from reweight.study import parse_study


def study_of(pressure, unit, energy="kJ/mol", system=""):
    return parse_study(
        f'schema = 1\nenergy_unit = "{energy}"\n{system}\n[conditions]\npressure = "{pressure}"\n'
        f'[columns]\nvolume = "V"\nvolume_unit = "{unit}"\n[[run]]\ntemperature = 300\nfiles = "a"\n',
        folder=".",
    )


# 1 bar nm^3 = 1e-22 J, times the exact N_A = 6.02214076e23 /mol: 60.2214076 J/mol (SI Brochure, 9th edition)
BAR_CUBIC_NANOMETRE = 0.0602214076


@pytest.mark.parametrize(
    ("pressure", "unit", "expected"),
    [
        ("1 bar", "nm^3", BAR_CUBIC_NANOMETRE),
        ("1e3bar", "nm3", 1000 * BAR_CUBIC_NANOMETRE),
        ("100 MPa", "angstrom^3", BAR_CUBIC_NANOMETRE),
        ("-2.5 bar", "nm^3", -2.5 * BAR_CUBIC_NANOMETRE),
        ("0 bar", "nm^3", 0.0),
        ("1 kJ/mol/nm^3", "nm^3", None),
    ],
)
def test_pressure_times_volume(pressure, unit, expected):
    if expected is None:
        with pytest.raises(ValueError, match="must be a pressure; got 'kJ/mol/nm\\^3'"):
            study_of(pressure, unit)
    else:
        assert study_of(pressure, unit).pressure_energy == pytest.approx(expected, rel=1e-13, abs=0)


def test_volumes_per_atom_are_multiplied_by_the_count():
    study = study_of("1 bar", "nm^3", system='[system]\ncount = 500\nvolumes_are = "per atom"')
    assert study.system.energy_multiplier == 1
    assert study.pressure_energy == pytest.approx(500 * BAR_CUBIC_NANOMETRE, rel=1e-13)


def test_reduced_pressures_are_numbers():
    assert study_of("0.5 reduced", "reduced", energy="reduced").pressure_energy == 0.5


def test_without_a_pressure_there_is_no_such_energy():
    study = parse_study(
        'schema = 1\nenergy_unit = "eV"\n[[run]]\ntemperature = 300\nfiles = "a"\n', folder="."
    )
    assert study.pressure_energy is None
