"""Energies in the wrong unit are found by their fluctuations.

A quadratic system of shape k has E = k k_B T and Var(E) = k (k_B T)^2, so its rise is known without simulation; source: any
text on equipartition (from memory).
"""

import pytest
import scipy.constants

from reweight.drafting.consistency import Point, excess_of_rise, fitting_units

SHAPE = 15.0
CALORIE = 4.184  # kJ/mol in kcal/mol; the thermochemical calorie


def points(factor=1.0, temperatures=(300.0, 320.0, 340.0), unit="K"):
    boltzmann = scipy.constants.R / 1000
    return [
        Point(
            key="temperature",
            value=t,
            temperature_unit=unit,
            mean=factor * SHAPE * boltzmann * t,
            variance=factor**2 * SHAPE * (boltzmann * t) ** 2,
        )
        for t in temperatures
    ]


@pytest.mark.parametrize("factor", [1.0, 1 / CALORIE, 1 / 50, 1000.0])
def test_the_excess_is_one_over_the_factor_the_energies_are_off_by(factor):
    """The trapezoid errs by (1 + r^2) / (2 r) with r the ratio of neighbouring temperatures: here at most 0.3 %."""
    assert excess_of_rise(points(factor), "kJ/mol") == pytest.approx(1 / factor, rel=3e-3)


def test_the_unit_that_fits_is_named_first():
    assert fitting_units(points(1 / CALORIE))[0] == ("kcal/mol",)
    assert fitting_units(points())[0] == ("kJ/mol",)


def test_every_common_unit_is_offered_once():
    fitting, others = fitting_units(points())

    assert len({*fitting, *others}) == len(fitting) + len(others)
    assert {"kcal/mol", "eV", "hartree"} < set(others)


def test_runs_too_far_apart_tell_nothing():
    assert excess_of_rise(points(temperatures=(300.0, 3000.0)), "kJ/mol") is None


@pytest.mark.parametrize("temperatures", [(300.0,), (), (300.0, 300.0)])
def test_one_temperature_tells_nothing(temperatures):
    assert excess_of_rise(points(temperatures=temperatures), "kJ/mol") is None


def test_inverse_temperatures_tell_nothing_about_the_unit():
    """They are in one over the unit of the energies, whatever that is."""
    inverse = [
        Point(key="beta", value=1 / t, temperature_unit="", mean=SHAPE * t, variance=SHAPE * t**2)
        for t in (1.0, 1.1)
    ]

    assert fitting_units(inverse)[0] == ()
    assert excess_of_rise(inverse, "eV") == pytest.approx(1.0, rel=0.01)
