"""The tallied estimator against the plain sum over all samples, and against pymbar on the same samples.

Panels promise that nothing is lost: free energies, mean energy, heat capacity and effective sample size must agree with
the sample-by-sample estimator (tests/naive.py) to rounding.  Tolerance 1e-10: rounding of ``beta E`` in sums over some
10,000 samples costs about 1e-13, and a panel of a wrong width or order shows at 1e-9 or more.  The reference energy is
subtracted before the naive sum is made, since at an offset of 1e6 the naive sum would be the less exact one of the two.

pymbar (J. Chem. Phys. 129, 124105 (2008)) is independent code for the free energies with all samples weighted alike.
"""

from __future__ import annotations

import dataclasses
import logging
from dataclasses import dataclass

import numpy as np
import pytest
from naive import sample_by_sample

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.combining import combine_sources
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.quantities.moments import Moments
from reweight.runs import Source
from reweight.tally import nodes

TOLERANCE = 1e-10
PYMBAR_TOLERANCE = 1e-9


@dataclass(frozen=True)
class Case:
    """Runs of ``2 shape`` quadratic degrees of freedom; neighbouring means ``spacing`` standard deviations apart."""

    runs: int
    spacing: float
    shape: float = 40.0
    shortest: int = 300
    longest: int = 300
    twins: bool = False

    def draw(self, seed: int) -> tuple[dict[str, np.ndarray], np.ndarray]:
        """Energies by run, and temperatures."""
        rng = np.random.default_rng(seed)
        temperatures = (1 + self.spacing / np.sqrt(self.shape)) ** np.arange(self.runs)
        if self.twins:
            temperatures[1] = temperatures[0]
        sizes = rng.integers(self.shortest, self.longest, self.runs, endpoint=True)
        drawn = [rng.gamma(self.shape, t, n) for t, n in zip(temperatures, sizes, strict=True)]
        return {f"run {i}": energies for i, energies in enumerate(drawn)}, temperatures


CASES = {
    "one run": Case(1, 1.0, longest=3000),
    "two runs, close": Case(2, 0.5),
    "two runs, far apart": Case(2, 4.5, shortest=2000, longest=2000),
    "three runs, unequal lengths": Case(3, 1.5, shortest=50, longest=5000),
    "four runs, two at one temperature": Case(4, 1.2, twins=True),
    "six runs, thin overlap": Case(6, 4.0, shortest=1500, longest=2500),
    "eight runs, narrow energies": Case(8, 1.0, shape=4000.0),
    "eight runs, wide energies": Case(8, 1.0, shape=3.0),
    "sixteen runs": Case(16, 1.4, shortest=100, longest=900),
    "thirty-two runs": Case(32, 0.9, shortest=100, longest=200),
}


def assert_same_as_naive(combined: rw.DensityOfStates, runs: dict[str, np.ndarray], offset: float) -> None:
    """Free energies, E, C and effective sample size, at, between and slightly beyond the simulated temperatures."""
    estimate = combined.estimate
    reference = estimate.assembly.reference
    inefficiencies = (
        None
        if combined.description.weighting == "samples"
        else np.array([run.decision.weight_inefficiency for run in combined.runs])
    )
    kept = [
        runs[run.name][run.transient_rows :] - reference for run in combined.runs
    ]  # exact: both numbers have few bits beyond the offset
    naive = sample_by_sample(kept, estimate.beta, inefficiencies)

    np.testing.assert_allclose(estimate.solution.free_energies, naive.free_energies, rtol=0, atol=TOLERANCE)

    coldest, hottest = estimate.beta.max(), estimate.beta.min()
    beta = np.unique(np.concatenate([np.linspace(hottest * 0.97, coldest * 1.03, 9), estimate.beta]))
    energy, capacity = evaluate(combined, [MeanEnergy(), HeatCapacity()], beta)
    expected_capacity = np.array([naive.heat_capacity(b) for b in beta])
    fluctuation = np.sqrt(expected_capacity) / beta
    expected_energy = np.array([naive.mean_energy(b) for b in beta])
    deviation = (energy.value - reference - expected_energy) / fluctuation
    # The answer itself is a double near the offset: its last bit is the finest that can be compared.
    last_bit = np.spacing(abs(offset)) / fluctuation
    assert np.all(np.abs(deviation) <= TOLERANCE + last_bit)
    np.testing.assert_allclose(
        estimate.canonical(beta).mean_energy, expected_energy, rtol=0, atol=1e-10 * fluctuation.min()
    )
    np.testing.assert_allclose(capacity.value, expected_capacity, rtol=TOLERANCE)
    np.testing.assert_allclose(
        energy.effective_sample_size, [naive.effective_sample_size(b) for b in beta], rtol=TOLERANCE
    )


@pytest.mark.parametrize("weighting", ["samples", "independent"])
@pytest.mark.parametrize("offset", [0.0, 1e6])
@pytest.mark.parametrize("name", CASES)
def test_panels_lose_nothing_against_the_sum_over_all_samples(
    name: str, offset: float, weighting: str
) -> None:
    runs, temperatures = CASES[name].draw(seed=20240501)
    runs = {run: energies + offset for run, energies in runs.items()}

    combined = rw.combine(runs, temperatures=temperatures, weighting=weighting, discard=0)

    assert not combined.estimate.assembly.discrete
    assert_same_as_naive(combined, runs, offset)


def test_leaving_out_a_start_is_the_same_as_never_having_read_it() -> None:
    runs, temperatures = CASES["three runs, unequal lengths"].draw(seed=3)

    combined = rw.combine(runs, temperatures=temperatures, discard="20 %")

    assert all(run.transient_rows >= 0.2 * run.rows for run in combined.runs)
    assert_same_as_naive(combined, runs, 0.0)


@pytest.mark.parametrize("seed", range(4))
def test_levels_are_counted_without_any_loss(seed: int) -> None:
    rng = np.random.default_rng(seed)
    temperatures = [1.0, 1.3, 1.8]
    runs = {f"{t}": rng.poisson(20 * t, 700).astype(float) for t in temperatures}

    combined = rw.combine(runs, temperatures=temperatures, discard=0)

    assert combined.estimate.assembly.discrete
    assert_same_as_naive(combined, runs, 0.0)


def test_observables_lose_nothing_either() -> None:
    """An observable need not be smooth in the energy: only the weights of the samples are."""
    rng = np.random.default_rng(11)
    temperatures = [1.0, 1.25, 1.6]
    energies = {f"{t}": rng.gamma(25.0, t, 900) for t in temperatures}
    runs = {
        name: {
            "energy": e,
            "order": np.sign(rng.standard_normal(e.size)) * np.sqrt(e) + rng.standard_normal(e.size),
        }
        for name, e in energies.items()
    }

    combined = rw.combine(
        runs,
        temperatures=temperatures,
        observables={"order": {"moments": [1, 2, 4], "absolute": True}},
        weighting="samples",
        discard=0,
    )

    estimate = combined.estimate
    naive = sample_by_sample([e - estimate.assembly.reference for e in energies.values()], estimate.beta)
    order = np.concatenate([columns["order"] for columns in runs.values()])
    values = {(1, False): order, (2, False): order**2, (4, False): order**4, (1, True): np.abs(order)}
    beta = np.array([0.6, 0.7, 0.9, 1.02])
    weights = estimate.canonical(beta).weights
    assert len(estimate.columns) == 1 + len(values)
    for column in estimate.columns[1:]:
        wanted = values[column.power, column.absolute]
        scale = np.abs(wanted).max()
        np.testing.assert_allclose(
            estimate.column(column) @ weights,
            [naive.mean(wanted, b) for b in beta],
            rtol=0,
            atol=TOLERANCE * scale,
        )


def test_narrower_panels_change_nothing() -> None:
    """The default width is not at the limit of what holds: half of it gives the same to rounding."""
    runs, temperatures = CASES["six runs, thin overlap"].draw(seed=5)
    wide = rw.combine(runs, temperatures=temperatures, discard=0)
    beta = np.linspace(wide.estimate.beta.min(), wide.estimate.beta.max(), 7)

    description = dataclasses.replace(wide.description, resolution=wide.estimate.assembly.width / 2)
    narrow = combine_sources(
        [
            Source(name=name, beta=1 / t, chunks=lambda e=runs[name]: iter([e[:, None]]), discard=0)
            for name, t in zip(runs, temperatures, strict=True)
        ],
        description,
    )

    assert narrow.estimate.assembly.width == wide.estimate.assembly.width / 2
    for a, b in zip(
        evaluate(wide, [MeanEnergy(), HeatCapacity()], beta),
        evaluate(narrow, [MeanEnergy(), HeatCapacity()], beta),
        strict=True,
    ):
        np.testing.assert_allclose(a.value, b.value, rtol=TOLERANCE)


def test_panels_too_wide_are_noticed_by_these_very_comparisons(monkeypatch: pytest.MonkeyPatch) -> None:
    """Negative control: with panels 32 times as wide the comparison with the naive sum must fail."""
    original = nodes.panel_width
    monkeypatch.setattr(nodes, "panel_width", lambda *arguments: 32 * original(*arguments))
    runs, temperatures = CASES["six runs, thin overlap"].draw(seed=20240501)
    combined = rw.combine(runs, temperatures=temperatures, weighting="samples", discard=0)

    with pytest.raises(AssertionError):
        assert_same_as_naive(combined, runs, 0.0)


@pytest.mark.parametrize("name", ["two runs, close", "three runs, unequal lengths", "six runs, thin overlap"])
def test_free_energies_agree_with_pymbar(name: str) -> None:
    # It advertises an optional dependency through its loggers on import, and names its solver steps there.
    logging.getLogger("pymbar").setLevel(logging.ERROR)
    import pymbar

    runs, temperatures = CASES[name].draw(seed=77)
    combined = rw.combine(runs, temperatures=temperatures, weighting="samples", discard=0)
    beta = combined.estimate.beta
    energies = np.concatenate(list(runs.values())) - combined.estimate.assembly.reference
    reference = pymbar.MBAR(
        beta[:, None] * energies,
        [run.size for run in runs.values()],
        relative_tolerance=1e-13,
        solver_protocol=({"method": "adaptive", "tol": 1e-13, "options": {"min_sc_iter": 0}},),
    )

    found = combined.estimate.solution.free_energies
    np.testing.assert_allclose(
        found - found[0], reference.f_k - reference.f_k[0], rtol=0, atol=PYMBAR_TOLERANCE
    )


def test_moments_know_the_partition_function_of_the_simulated_temperatures() -> None:
    """``ln Z(beta_i) = -f_i`` is the self-consistency condition itself."""
    runs, temperatures = CASES["sixteen runs"].draw(seed=9)
    combined = rw.combine(runs, temperatures=temperatures, discard=0)
    moments = Moments(combined.estimate.canonical(combined.estimate.beta), 1.0)

    np.testing.assert_allclose(
        moments.canonical.log_partition, -combined.estimate.solution.free_energies, rtol=0, atol=TOLERANCE
    )
