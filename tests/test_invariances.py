"""What must not matter: order, names, units, zero of the energy, and how equal samples are divided into runs.

Each is an identity of the equations: the answers agree to rounding (1e-10), not within error bars.  Standard errors
depend on where leaves begin and on panel edges only through rounding, except when a run is divided: then its leaves
differ, and the standard error is another estimate of the same number.
"""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import reweight as rw
from reweight.units import boltzmann_constant

TEMPERATURES = {"cold": 1.0, "middle": 1.25, "hot": 1.6, "hottest": 2.0}
ASKED = np.array([1.1, 1.25, 1.7])
SAME = 1e-10


def draw(seed: int = 4) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(seed)
    return {name: rng.gamma(25.0, t, 1500) for name, t in TEMPERATURES.items()}


def combine(
    runs: dict[str, np.ndarray], temperatures: dict[str, float] = TEMPERATURES, **keys: object
) -> rw.DensityOfStates:
    return rw.combine(runs, temperatures=[temperatures[name] for name in runs], discard=0, **keys)


def assert_same(one: xr.Dataset, other: xr.Dataset, *, errors: bool = True) -> None:
    for name in ("mean_energy", "heat_capacity"):
        np.testing.assert_allclose(other[name], one[name], rtol=SAME)
        if errors:
            error = f"{name}_standard_error"
            # A window is a whole number: it must not hinge on rounding, or this comparison would show it.
            np.testing.assert_allclose(other[error], one[error], rtol=1e-8)
    np.testing.assert_allclose(other["effective_sample_size"], one["effective_sample_size"], rtol=SAME)


def test_the_order_of_the_runs_does_not_matter() -> None:
    runs = draw()
    shuffled = {name: runs[name] for name in ("hot", "cold", "hottest", "middle")}

    assert_same(rw.curve(combine(runs), ASKED), rw.curve(combine(shuffled), ASKED))


def test_the_names_of_the_runs_do_not_matter() -> None:
    runs = draw()
    renamed = {f"z {9 - i}": energies for i, energies in enumerate(runs.values())}

    other = rw.combine(renamed, temperatures=list(TEMPERATURES.values()), discard=0)

    one = rw.curve(combine(runs), ASKED)
    xr.testing.assert_identical(one.drop_vars("run"), rw.curve(other, ASKED).drop_vars("run"))


@pytest.mark.parametrize("constant", [1.0, -37.123, 12345.678])
def test_adding_a_constant_to_all_energies_shifts_the_mean_energy_by_it(constant: float) -> None:
    runs = draw()
    one = rw.curve(combine(runs), ASKED)
    other = rw.curve(combine({name: energies + constant for name, energies in runs.items()}), ASKED)

    other["mean_energy"] = other["mean_energy"] - constant
    assert_same(one, other)


@pytest.mark.parametrize(
    ("energy_unit", "temperature_scale"), [("kJ/mol", 300.0), ("eV", 300.0), ("kcal/mol", 70.0)]
)
def test_the_unit_of_the_energies_does_not_matter(energy_unit: str, temperature_scale: float) -> None:
    """The same physics in kelvin: energies times ``k_B T_scale`` in the unit, temperatures times ``T_scale``."""
    runs = draw()
    k = boltzmann_constant(energy_unit, "K")
    one = rw.curve(combine(runs), ASKED)
    in_unit = rw.combine(
        {name: energies * k * temperature_scale for name, energies in runs.items()},
        temperatures=[t * temperature_scale for t in TEMPERATURES.values()],
        energy_unit=energy_unit,
        temperature_unit="K",
        discard=0,
    )
    other = rw.curve(in_unit, ASKED * temperature_scale)

    for name in list(other.data_vars):
        if name.startswith("mean_energy") and other[name].dtype == float:
            other[name] = other[name] / (k * temperature_scale)
        elif name.startswith("heat_capacity") and other[name].dtype == float:
            other[name] = other[name] / k
    assert_same(one, other)
    assert (other["within_reach"].to_numpy() == one["within_reach"].to_numpy()).all()


def test_answers_can_be_asked_in_another_unit_than_the_energies_have() -> None:
    k = boltzmann_constant("kJ/mol", "K")
    combined = rw.combine(
        {name: energies * k * 300 for name, energies in draw().items()},
        temperatures=[300 * t for t in TEMPERATURES.values()],
        energy_unit="kJ/mol",
        temperature_unit="K",
        discard=0,
    )

    joule = rw.curve(combined, 300 * ASKED)
    calorie = rw.curve(combined, 300 * ASKED, energy_unit="kcal/mol")

    for name in ("mean_energy", "mean_energy_standard_error", "mean_energy_interval", "heat_capacity"):
        np.testing.assert_allclose(
            calorie[name] * 4.184, joule[name], rtol=1e-12
        )  # thermochemical calorie, exact
    assert calorie["mean_energy"].attrs["units"] == "kcal mol-1"


def test_celsius_and_kelvin_give_the_same_answers() -> None:
    k = boltzmann_constant("eV", "K")
    runs = {name: energies * k * 300 for name, energies in draw().items()}
    kelvin = np.array([300 * t for t in TEMPERATURES.values()])
    one = rw.combine(runs, temperatures=kelvin, energy_unit="eV", temperature_unit="K", discard=0)
    other = rw.combine(
        runs, temperatures=kelvin - 273.15, energy_unit="eV", temperature_unit="degC", discard=0
    )

    assert_same(rw.curve(one, 300 * ASKED), rw.curve(other, 300 * ASKED - 273.15))


def test_dividing_a_run_in_two_changes_no_answer_when_samples_are_weighted_alike() -> None:
    runs = draw()
    divided = {"hot, first half": runs["hot"][:700], **runs, "hot": runs["hot"][700:]}
    temperatures = {**TEMPERATURES, "hot, first half": TEMPERATURES["hot"]}

    one = combine(runs, weighting="samples")
    other = combine(divided, temperatures, weighting="samples")

    assert_same(rw.curve(one, ASKED), rw.curve(other, ASKED), errors=False)
    halves = [
        other.runs.index(run) for run in other.runs if run.name.startswith("hot") and run.name != "hottest"
    ]
    free = other.estimate.solution.free_energies[halves]
    assert abs(free[0] - free[1]) < SAME


def test_two_runs_at_one_temperature_are_as_good_as_one_of_their_samples() -> None:
    rng = np.random.default_rng(8)
    first, second = rng.gamma(25.0, 1.3, 900), rng.gamma(25.0, 1.3, 2100)

    apart = rw.combine({"a": first, "b": second}, temperatures=[1.3, 1.3], weighting="samples", discard=0)
    together = rw.combine(
        {"both": np.concatenate([first, second])}, temperatures=[1.3], weighting="samples", discard=0
    )

    asked = np.array([1.25, 1.3, 1.35])
    one, other = rw.curve(together, asked), rw.curve(apart, asked)
    assert_same(one, other, errors=False)
    pooled = np.concatenate([first, second])
    assert float(other["mean_energy"][1]) == pytest.approx(pooled.mean(), rel=SAME)
    assert float(other["heat_capacity"][1]) == pytest.approx(pooled.var() / 1.3**2, rel=SAME)
    # Other leaves: another estimate of the same error, known to about 1 / sqrt(2 * 64) = 9 % from each.
    np.testing.assert_allclose(
        other["mean_energy_standard_error"], one["mean_energy_standard_error"], rtol=0.5
    )


def test_a_peak_lies_at_the_same_place_in_every_unit() -> None:
    rng = np.random.default_rng(21)
    temperatures = np.array([0.3, 0.4, 0.5])
    gap_energies = {
        f"{t}": rng.binomial(20, 1 / (1 + np.exp(1 / t)), 3000).astype(float) for t in temperatures
    }
    k = boltzmann_constant("eV", "K")

    reduced = rw.peaks(rw.combine(gap_energies, temperatures=temperatures, discard=0))[0]
    in_unit = rw.peaks(
        rw.combine(
            {name: energies * 0.02 for name, energies in gap_energies.items()},
            temperatures=temperatures * 0.02 / k,
            energy_unit="eV",
            temperature_unit="K",
            discard=0,
        )
    )[0]

    assert not reduced.at_edge
    assert in_unit.temperature == pytest.approx(
        reduced.temperature * 0.02 / k, rel=1e-7
    )  # flat top: half the digits
    assert in_unit.height == pytest.approx(reduced.height * k, rel=SAME)
    assert in_unit.temperature_standard_error == pytest.approx(
        reduced.temperature_standard_error * 0.02 / k, rel=1e-5
    )
    assert in_unit.unit == "eV K-1"


def test_a_wrong_temperature_does_matter() -> None:
    """Negative control: these comparisons would see it."""
    runs = draw()
    one = rw.curve(combine(runs), ASKED)
    other = rw.curve(combine(runs, {**TEMPERATURES, "hot": 1.61}), ASKED)

    with pytest.raises(AssertionError):
        assert_same(one, other)
