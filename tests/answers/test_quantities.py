"""Entropy, free energy and observables against exact values, and how answers are scaled and labelled.

Sources of the constants: ln Z / N of the periodic 4 x 4 and 8 x 8 lattice of two-state sites from B. Kaufman, Phys. Rev.
76, 1232 (1949), checked by enumeration (4 x 4) and by an exact-integer transfer matrix (8 x 8); <abs m> and its slope by
enumeration (4 x 4) and transfer matrix with a field (8 x 8).  k_B = J = 1.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.exact import canonical, lattice_log_degeneracies
from reweight.datasets.square_lattice import simulate_square_lattice
from reweight.quantities.catalogue import available
from reweight.quantities.moments import LOG_PARTITION
from reweight.quantities.quantity import Scaling

T_CRITICAL = 2.269185314213022  # 2 / ln(1 + sqrt 2), Onsager 1944

# temperature: ln Z / N
LOG_PARTITION_PER_SITE = {
    4: {2.0: 1.069085444921, 2.2: 0.992191663193, 2.5: 0.910068313990, 3.0: 0.830064590974},
    8: {
        2.0: 1.036634091863,
        2.2: 0.960928975647,
        2.5: 0.884365449382,
        3.0: 0.816584525931,
        5.0: 0.734533553475,
    },
}

# temperature: <abs m>, d<abs m>/dT
MAGNETIZATION = {
    4: {
        2.0: (0.918943267402, -0.227851666056),
        T_CRITICAL: (0.843860444813, -0.322764954489),
        2.5: (0.764712393222, -0.353751139666),
        3.0: (0.601291326039, -0.280017809673),
    },
    8: {
        2.0: (0.91145226614, -0.31629763),
        T_CRITICAL: (0.77733109279, -0.68610296),
        2.5: (0.60312897941, -0.75101573),
        3.0: (0.34603461334, -0.29621475),
    },
}


def assert_within_error(answer, label: str, exact, cap: float, *, reference_at: float | None = None) -> None:
    value, error = answer[label].to_numpy(), answer[f"{label}_standard_error"].to_numpy()
    varies = answer.temperature.to_numpy() != reference_at
    off = np.abs(value - np.asarray(exact))
    assert np.all(off[varies] <= 4 * error[varies])
    assert np.all((error[varies] > 0) & (error[varies] < cap))


# --- entropy and free energy ------------------------------------------------------------------------------------------


def test_free_energy_differences_agree_with_the_published_partition_function(lattice) -> None:
    table = LOG_PARTITION_PER_SITE[8]
    temperatures = np.array(list(table))

    answer = rw.curve(lattice, temperatures, of="free_energy", reference=2.0)

    exact = 64 * (table[2.0] - np.array(list(table.values())))
    assert_within_error(answer, "free_energy", exact, cap=0.15, reference_at=2.0)
    assert float(answer.free_energy[0]) == 0
    assert float(answer.free_energy_standard_error[0]) == 0


def test_free_energy_differences_of_the_enumerated_lattice_agree(small_lattice) -> None:
    table = LOG_PARTITION_PER_SITE[4]

    answer = rw.curve(small_lattice, list(table), of="free_energy", reference=2.2)

    assert_within_error(
        answer, "free_energy", 16 * (table[2.2] - np.array(list(table.values()))), cap=0.05, reference_at=2.2
    )


@pytest.mark.parametrize("reference", [2.0, 3.0, math.inf])
def test_entropy_differences_agree_with_exact_sums(lattice, reference) -> None:
    temperatures = np.array([2.2, 2.6, 4.0, 8.0])
    exact = canonical(*lattice_log_degeneracies(8), [*temperatures, reference])
    entropy = exact.log_partition + exact.mean_energy / exact.temperatures

    answer = rw.curve(lattice, temperatures, of="entropy", reference=reference)

    assert_within_error(answer, "entropy", entropy[:-1] - entropy[-1], cap=0.3)
    assert f"counted from {reference:g}" in answer.entropy.attrs["long_name"]


def test_another_reference_shifts_an_entropy_by_a_constant_and_its_error_to_that_of_the_difference(
    lattice,
) -> None:
    temperatures = [2.0, 2.5, 4.0]
    cold, hot = (rw.curve(lattice, temperatures, of="entropy", reference=t) for t in (2.0, 4.0))

    shift = (cold.entropy - hot.entropy).to_numpy()
    np.testing.assert_allclose(shift, shift[0], rtol=0, atol=1e-10)
    assert float(cold.entropy[2]) == pytest.approx(-float(hot.entropy[0]), abs=1e-10)
    assert float(cold.entropy_standard_error[2]) == pytest.approx(
        float(hot.entropy_standard_error[0]), rel=1e-9
    )
    assert float(cold.entropy_standard_error[0]) == float(hot.entropy_standard_error[2]) == 0


def test_an_entropy_is_the_integral_of_the_heat_capacity_over_ln_t(oscillators) -> None:
    """S(T2) - S(T1) = integral of C / T (Clausius); two different combinations of the same samples, one number."""
    fine = np.linspace(285.0, 340.0, 401)
    capacity = rw.curve(oscillators, fine, of="heat_capacity").heat_capacity.to_numpy()

    entropy = rw.curve(oscillators, 340.0, of="entropy", reference=285.0).entropy

    assert float(entropy[0]) == pytest.approx(np.trapezoid(capacity / fine, fine), rel=1e-6)


def test_a_cold_run_out_of_its_own_reach_is_not_what_entropies_are_counted_from() -> None:
    """A coldest run of a few samples supports nothing; counted from it, every entropy would be empty."""
    rng = np.random.default_rng(9)
    runs = {
        "short": rng.gamma(30.0, 0.65, 12),
        "cold": rng.gamma(30.0, 1.0, 4000),
        "hot": rng.gamma(30.0, 1.2, 4000),
    }
    combined = rw.combine(runs, temperatures=[0.65, 1.0, 1.2], discard=0)
    assert rw.reach(combined, "entropy").lowest > 0.65

    answer = rw.curve(combined, [1.05, 1.15], of="entropy")

    assert answer.entropy.notnull().all()
    assert "counted from 1" in answer.entropy.attrs["long_name"]
    exact = 30 * np.log(np.array([1.05, 1.15]))  # C = 30 k_B
    assert_within_error(answer, "entropy", exact, cap=0.2)


def test_a_reference_out_of_reach_is_refused_as_such(oscillators) -> None:
    with pytest.raises(rw.OutOfReachError, match=r"the reference must lie in \[.*\] K.*got 900 K"):
        rw.curve(oscillators, 300.0, of="entropy", reference=900.0)

    marked = rw.curve(oscillators, 300.0, of="entropy", reference=900.0, beyond_reach=True)
    assert not bool(marked.entropy_within_reach[0])
    assert marked.entropy.notnull().all()


# --- observables ------------------------------------------------------------------------------------------------------


def test_an_observable_agrees_with_the_enumeration_at_temperatures_not_simulated(small_lattice) -> None:
    table = MAGNETIZATION[4]

    answer = rw.curve(small_lattice, list(table), of=["absm.mean", "absm.slope"])

    mean, slope = np.array(list(table.values())).T
    assert_within_error(answer, "absm_mean", mean, cap=0.005)
    assert_within_error(answer, "absm_slope", slope, cap=0.02)


def test_an_observable_of_a_simulated_lattice_agrees_with_the_transfer_matrix() -> None:
    table = MAGNETIZATION[8]
    temperatures = [1.9, 2.15, 2.4, 2.7, 3.1]
    series = simulate_square_lattice(8, temperatures, 4000, 3, np.random.default_rng(44))
    runs = {
        str(t): {"energy": series.energy[place], "absm": np.abs(series.magnetization[place]) / 64}
        for place, t in enumerate(temperatures)
    }

    answer = rw.curve(
        rw.combine(runs, temperatures=temperatures), list(table), of=["absm.mean", "absm.slope"]
    )

    mean, slope = np.array(list(table.values())).T
    assert_within_error(answer, "absm_mean", mean, cap=0.01)
    assert_within_error(answer, "absm_slope", slope, cap=0.05)


def test_a_covariance_is_the_slope_times_t_squared_in_reduced_units(small_lattice) -> None:
    """d<A>/dT = (<A E> - <A><E>) / (k_B T**2)."""
    temperatures = np.array([1.9, 2.3, 3.0])
    answer = rw.curve(small_lattice, temperatures, of=["absm.slope", "absm.covariance"])

    for part in ("", "_standard_error"):
        np.testing.assert_allclose(
            answer[f"absm_covariance{part}"], answer[f"absm_slope{part}"] * temperatures**2, rtol=1e-12
        )


def test_a_slope_is_the_derivative_of_the_mean(oscillators) -> None:
    """A central difference of the reweighted mean itself, step 0.01 K: no noise enters between the two."""
    means = rw.curve(oscillators, [309.99, 310.01], of="size.mean").size_mean.to_numpy()
    slope = rw.curve(oscillators, 310.0, of="size.slope").size_slope

    assert float(slope[0]) == pytest.approx((means[1] - means[0]) / 0.02, rel=1e-6)


def test_a_heat_capacity_is_the_derivative_of_the_energy_and_minus_that_of_free_energy_is_the_energy(
    oscillators,
) -> None:
    k = oscillators.description.boltzmann_constant
    energies = rw.curve(oscillators, [309.99, 310.01], of="energy").mean_energy.to_numpy()
    free = rw.curve(oscillators, [309.99, 310.01], of="free_energy").free_energy.to_numpy()
    at = rw.curve(oscillators, 310.0)

    assert float(at.heat_capacity[0]) == pytest.approx((energies[1] - energies[0]) / 0.02, rel=1e-6)
    step = 1 / (k * 310.01) - 1 / (k * 309.99)
    assert float(at.mean_energy[0]) == pytest.approx((free[1] - free[0]) / step, rel=1e-6)


# --- scaling and units ------------------------------------------------------------------------------------------------

LABELS = {
    "energy": ("mean_energy", "kJ mol-1"),
    "heat_capacity": ("heat_capacity", "kJ mol-1 K-1"),
    "entropy": ("entropy", "kJ mol-1 K-1"),
    "free_energy": ("free_energy", "1"),
    "size.mean": ("size_mean", "nm"),
    "size.slope": ("size_slope", "nm K-1"),
    "size.covariance": ("size_covariance", "nm kJ mol-1"),
}
EXTENSIVE = {
    "energy",
    "heat_capacity",
    "entropy",
    "free_energy",
    "size.mean",
    "size.slope",
    "size.covariance",
}


def test_the_table_below_knows_every_quantity(oscillators) -> None:
    assert set(oscillators.quantity_names) == set(LABELS)


@pytest.mark.parametrize("name", LABELS)
def test_units_are_spelled_as_udunits_does(oscillators, name) -> None:
    label, unit = LABELS[name]
    answer = rw.curve(oscillators, 300.0, of=name)

    assert answer[label].attrs["units"] == unit
    for part in ("standard_error", "interval"):
        assert answer[f"{label}_{part}"].attrs["units"] == unit
    assert answer.temperature.attrs["units"] == "K"
    per_kelvin = name in ("heat_capacity", "entropy", "size.slope")
    assert answer[label].attrs.get("units_metadata") == ("temperature: difference" if per_kelvin else None)
    for ancillary in answer[label].attrs["ancillary_variables"].split():
        assert ancillary in answer


@pytest.mark.parametrize("name", LABELS)
def test_answers_per_count_divide_what_is_extensive_and_nothing_else(oscillators, name) -> None:
    label, unit = LABELS[name]
    total, per = (rw.curve(oscillators, [290.0, 330.0], of=name, per_count=each) for each in (False, True))

    divisor = 20 if name in EXTENSIVE else 1
    for part in ("", "_standard_error", "_interval"):
        np.testing.assert_allclose(per[label + part] * divisor, total[label + part], rtol=1e-13)
    assert per[label].attrs["units"] == unit
    assert per[label].attrs["long_name"].endswith("per oscillator") == (divisor == 20)


def test_answers_in_another_energy_unit_convert_energies_and_what_contains_them(oscillators) -> None:
    """1 kcal = 4.184 kJ (thermochemical calorie, by definition); observables and pure numbers stay."""
    names = list(LABELS)
    own = rw.curve(oscillators, 300.0, of=names, reference=320.0)
    other = rw.curve(oscillators, 300.0, of=names, reference=320.0, energy_unit="kcal/mol")

    for name, (label, unit) in LABELS.items():
        factor = 1 / 4.184 if "kJ" in unit else 1.0
        np.testing.assert_allclose(other[label], own[label] * factor, rtol=1e-12)
        assert other[label].attrs["units"] == unit.replace("kJ", "kcal"), name


def test_reduced_answers_bear_no_unit(small_lattice) -> None:
    answer = rw.curve(small_lattice, 2.0, of=small_lattice.quantity_names)

    for name in small_lattice.quantity_names:
        label = available(small_lattice.description.normalisations)[name].label
        assert answer[label].attrs["units"] == "1"
        assert "units_metadata" not in answer[label].attrs
    assert answer.temperature.attrs["units"] == "1"


@pytest.mark.parametrize(
    ("normalisation", "divided"), [("total", True), ("per site", False), ("plain", False)]
)
def test_the_declared_normalisation_of_an_observable_decides_what_per_count_does(
    normalisation, divided
) -> None:
    quantities = available({"order": normalisation})

    for name in ("order.mean", "order.slope", "order.covariance"):
        assert (quantities[name].scaling is Scaling.EXTENSIVE) == divided


def test_answers_per_count_need_a_count() -> None:
    rng = np.random.default_rng(1)
    combined = rw.combine({"a": rng.gamma(20.0, 1.0, 1000)}, temperatures=[1.0])

    with pytest.raises(
        rw.InputError, match=r"need the number of particles; the study declares none\. Add count"
    ):
        rw.curve(combined, 1.0, per_count=True)


def test_a_quantity_that_was_not_recorded_is_refused_with_what_can_be_asked(small_lattice) -> None:
    with pytest.raises(
        rw.InputError, match=r"must be one of energy, .*absm\.mean.*; got 'volume\.mean'"
    ) as refused:
        rw.curve(small_lattice, 2.0, of="volume.mean")
    assert refused.value.available == small_lattice.quantity_names


def test_ln_z_is_a_moment_on_the_scale_of_the_study_not_of_its_reference_energy() -> None:
    """Adding a constant c to all energies adds c (beta_2 - beta_1) to a difference of free energies over k_B T."""
    rng = np.random.default_rng(6)
    runs = {str(t): rng.gamma(20.0, t, 2000) for t in (1.0, 1.25)}
    one, other = (
        rw.combine({name: e + shift for name, e in runs.items()}, temperatures=[1.0, 1.25], discard=0)
        for shift in (0.0, 4096.0)
    )

    free = [rw.curve(each, 1.25, of="free_energy", reference=1.0).free_energy[0] for each in (one, other)]

    assert LOG_PARTITION.power == -1
    assert float(free[1] - free[0]) == pytest.approx(4096.0 * (1 / 1.25 - 1.0), abs=1e-8)


def test_the_absolute_mean_is_that_of_the_absolute_values() -> None:
    """One run and no reweighting: the mean over the run itself; and only where the absolute value was kept."""
    rng = np.random.default_rng(20240902)
    energy, signed = rng.gamma(30.0, 1.0, 4000), rng.standard_normal(4000)
    runs = {"a": {"energy": energy, "m": signed}}
    combined = rw.combine(runs, temperatures=[1.0], discard=0, observables={"m": {"absolute": True}})

    answer = rw.curve(combined, [1.0], of="m.absolute_mean")
    assert answer["m_absolute_mean"].item() == pytest.approx(np.abs(signed).mean(), rel=1e-12)
    assert "m.absolute_mean" not in rw.combine(runs, temperatures=[1.0], discard=0).quantity_names


def test_answers_at_the_outermost_runs_and_beyond_are_said_to_be_extrapolated(oscillators) -> None:
    answer = rw.curve(oscillators, [270.0, 280.0, 290.0, 344.0, 345.0, 350.0], beyond_reach=True)

    assert answer["extrapolated"].values.tolist() == [True, True, False, False, True, True]
