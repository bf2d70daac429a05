"""Boltzmann constants against tabulated ones, and the spelling of units."""

import pytest
import scipy.constants

from reweight.errors import InputError
from reweight.units import (
    boltzmann_constant,
    canonical_unit,
    energy_factor,
    per_kelvin,
    pressure_volume_factor,
    to_kelvin,
)

# SI Brochure, 9th edition (2019): k, N_A, e, h and c are exact, so the first six are; the calorie is the
# thermochemical one of 4.184 J.
EXACT = {
    "J": 1.380649e-23,
    "eV": 8.617333262145179e-5,
    "meV": 8.617333262145179e-2,
    "kJ/mol": 8.31446261815324e-3,
    "kcal/mol": 1.9872042586408317e-3,
    "cm^-1": 0.695034800486127,
    "K": 1.0,
}
HARTREE = 3.1668115634564e-6  # CODATA 2022, standard uncertainty 3.5e-18


@pytest.mark.parametrize("unit", EXACT)
def test_exact_constants_are_reproduced(unit):
    # 1e-14: the figures above are printed with 15 to 16 digits
    assert boltzmann_constant(unit, "K") == pytest.approx(EXACT[unit], rel=1e-14)


def test_hartree_agrees_with_codata_2022():
    assert boltzmann_constant("hartree", "K") == pytest.approx(HARTREE, rel=5e-14)  # printed with 14 digits


def test_constants_of_the_unit_library_are_those_of_the_other_library():
    """Two independent tables must agree; the Rydberg energy is a measured one."""
    rydberg = scipy.constants.physical_constants["Rydberg constant times hc in J"][0]
    assert boltzmann_constant("Ry", "K") == pytest.approx(scipy.constants.k / rydberg, rel=1e-12)


@pytest.mark.parametrize("same", ["kJ mol-1", "kJ/mol", "kJ*mol^-1", "kJ mol**-1", "kJ·mol^-1", " kJ / mol "])
def test_all_spellings_of_a_unit_mean_the_same(same):
    assert boltzmann_constant(same, "K") == boltzmann_constant("kJ/mol", "K")
    assert canonical_unit(same) == "kJ mol-1"


def test_reduced_units_have_constant_one():
    assert boltzmann_constant("reduced", "reduced") == 1.0


def test_degrees_celsius_change_the_zero_not_the_constant():
    assert boltzmann_constant("eV", "degC") == boltzmann_constant("eV", "K")
    assert to_kelvin(25.0, "degC") == 298.15
    assert to_kelvin(25.0, "K") == to_kelvin(25.0, "reduced") == 25.0


@pytest.mark.parametrize(
    ("energy_unit", "temperature_unit", "message"),
    [
        ("reduced", "K", "both or neither"),
        ("eV", "reduced", "both or neither"),
        ("eV", "degF", "must be one of K, degC, reduced; got 'degF'"),
        ("nonsense", "K", "'nonsense' is not one.*Use a unit like kJ/mol"),
        ("Hartree", "K", "Did you mean 'hartree'"),
        ("nm", "K", "must be an energy; got 'nm', which has the dimension"),
        ("kJ/mol/K", "K", "must be an energy; got 'kJ/mol/K'"),
        ("degC", "K", "'degC' is not one"),
        ("1", "K", "must be an energy"),
        ("", "K", "product of powers"),
        ("2 eV", "K", "product of powers"),
        ("eV/", "K", "product of powers"),
        ("9**9**9**9", "K", "product of powers"),
        ("__import__('os')", "K", "product of powers"),
    ],
)
def test_what_is_no_energy_unit_is_refused(energy_unit, temperature_unit, message):
    with pytest.raises(InputError, match=message):
        boltzmann_constant(energy_unit, temperature_unit)


def test_energies_convert_between_particles_and_amounts_of_substance():
    # 96.48533212331 kJ/mol is one eV: the Faraday constant, exact product of e and N_A (SI 2019)
    assert energy_factor("eV", "kJ/mol") == pytest.approx(96.48533212331001, rel=1e-14)
    assert energy_factor("kcal/mol", "kJ/mol") == pytest.approx(4.184, rel=1e-14)
    assert energy_factor("reduced", "reduced") == 1.0


# One bar is 1e5 Pa and one standard atmosphere 101325 Pa, both exact; with the exact N_A = 6.02214076e23 /mol and
# e = 1.602176634e-19 C (SI Brochure, 9th edition, 2019) and the calorie of 4.184 J, the products below are exact ratios,
# computed with 30 digits.  The hartree is that of CODATA 2022, 4.3597447222060e-18 J.
@pytest.mark.parametrize(
    ("pressure_unit", "volume_unit", "energy_unit", "expected"),
    [
        ("bar", "nm^3", "kJ/mol", 0.0602214076),
        ("atm", "angstrom^3", "kcal/mol", 101325e-30 * 6.02214076e23 / 4184),
        ("bar", "Å^3", "eV", 1e-25 / 1.602176634e-19),
        ("MPa", "nm^3", "J", 1e-21),
        ("GPa", "angstrom^3", "eV", 1e-21 / 1.602176634e-19),
        ("bar", "cm^3/mol", "J/mol", 0.1),
        ("bar", "L/mol", "kJ/mol", 0.1),
        ("Pa", "m^3", "hartree", 1 / 4.359744722206e-18),
        ("bar", "nm^3", "K", 1e-22 / 1.380649e-23),
        ("reduced", "reduced", "reduced", 1.0),
    ],
)
def test_pressure_times_volume_is_an_energy(pressure_unit, volume_unit, energy_unit, expected):
    # 1e-13: the hartree is printed with 13 digits; everything else is exact
    assert pressure_volume_factor(pressure_unit, volume_unit, energy_unit) == pytest.approx(
        expected, rel=1e-13
    )


@pytest.mark.parametrize(
    ("pressure_unit", "volume_unit", "energy_unit", "message"),
    [
        ("K", "nm^3", "eV", "unit of pressure must be a pressure; got 'K'.*Use a unit like bar"),
        ("bar", "nm", "eV", r"unit of volume must be a volume; got 'nm'.*Use a unit like nm\^3"),
        ("bar", "nm^3", "nm", "energy unit must be an energy"),
        ("bar", "reduced", "eV", "must be 'reduced' all or none; got pressure in 'bar', volume in 'reduced'"),
        ("baar", "nm^3", "eV", "'baar' is not one"),
    ],
)
def test_what_makes_no_energy_is_refused(pressure_unit, volume_unit, energy_unit, message):
    with pytest.raises(InputError, match=message):
        pressure_volume_factor(pressure_unit, volume_unit, energy_unit)


# Derived in the SI of 2019 from k_B and N_A, 12 digits
@pytest.mark.parametrize(
    ("unit", "kelvin", "thermal_energy"),
    [("kJ/mol", 300.0, 2.49433878545), ("kcal/mol", 298.15, 0.592484949714)],
)
def test_thermal_energies_agree_with_tabulated_ones(unit, kelvin, thermal_energy):
    assert boltzmann_constant(unit, "K") * kelvin == pytest.approx(thermal_energy, rel=2e-12)


def test_reduced_energies_do_not_convert():
    with pytest.raises(InputError, match="must stay reduced"):
        energy_factor("reduced", "eV")


@pytest.mark.parametrize(
    ("unit", "spelled", "spelled_per_kelvin"),
    [
        ("kJ/mol", "kJ mol-1", "kJ mol-1 K-1"),
        ("eV", "eV", "eV K-1"),
        ("1/cm", "cm-1", "cm-1 K-1"),
        ("K", "K", "1"),
        ("nm^2", "nm2", "nm2 K-1"),
        ("reduced", "1", "1"),
        ("1", "1", "1"),
    ],
)
def test_units_are_spelled_as_files_want_them(unit, spelled, spelled_per_kelvin):
    assert canonical_unit(unit) == spelled
    assert per_kelvin(spelled) == spelled_per_kelvin


def test_spelling_again_changes_nothing():
    assert canonical_unit(canonical_unit("kcal/mol/K")) == "kcal mol-1 K-1"
