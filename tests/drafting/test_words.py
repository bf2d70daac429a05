"""What headings mean."""

import pytest

from reweight.drafting.words import Role, energy_unit_of, read_heading, time_unit_of


@pytest.mark.parametrize(
    ("name", "bare", "unit", "per", "role"),
    [
        ("potential[kJ/mol]", "potential", "kJ/mol", "", Role.POTENTIAL),
        ("Potential Energy (kJ/mole)", "Potential Energy", "kJ/mole", "", Role.POTENTIAL),
        ("E_pot", "E_pot", "", "", Role.POTENTIAL),
        ("Etot [eV]", "Etot", "eV", "", Role.TOTAL),
        ("energy", "energy", "", "", Role.ENERGY),
        ("E[eV/atom]", "E", "eV", "atom", Role.ENERGY),
        ("energy per site", "energy per site", "", "site", Role.ENERGY),
        ("e/N", "e/N", "", "particle", Role.ENERGY),
        ("T[K]", "T", "K", "", Role.TEMPERATURE),
        ("t[ps]", "t", "ps", "", Role.CLOCK),
        ("V[nm^3]", "V", "nm^3", "", Role.VOLUME),
        ("v", "v", "", "", Role.OTHER),
        ("group/T", "group/T", "", "", Role.TEMPERATURE),
        ("MC_sweeps", "MC_sweeps", "", "", Role.OTHER),
        ("[kJ/mol]", "[kJ/mol]", "", "", Role.OTHER),
    ],
)
def test_a_heading_is_taken_apart(name, bare, unit, per, role):
    heading = read_heading(name)

    assert (heading.name, heading.unit, heading.per, heading.role) == (bare, unit, per, role)


def test_the_attribute_of_a_variable_is_its_unit():
    assert read_heading("epot", "kJ mol-1").unit == "kJ mol-1"


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("kJ/mol", "kJ/mol"),
        ("Kcal/mol", "kcal/mol"),
        ("LJ", "reduced"),
        ("1", "reduced"),
        ("epsilon", "reduced"),
        ("nm", None),
        ("bananas", None),
        ("", None),
    ],
)
def test_a_unit_of_energy_is_recognised(text, unit):
    assert energy_unit_of(text) == unit


@pytest.mark.parametrize(
    ("name", "unit"),
    [("time[ps]", "ps"), ("step", "step"), ("mcs", "sweep"), ("time", None), ("time[K]", None)],
)
def test_a_unit_of_time_is_recognised(name, unit):
    assert time_unit_of(read_heading(name)) == unit
