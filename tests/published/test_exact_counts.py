"""Without noise the answers are exact: runs replaced by the numbers of samples expected on each level.

The runs' expected counts ``N g(E) exp(-E / T) / Z(T)`` are fractions; put into the array layer as they are, they must
give back the published averages at any other temperature, to rounding.  L x L lattices of two-state sites, k_B = J = 1.
Source of the values: B. Kaufman, Phys. Rev. 76, 1232 (1949) (from memory), evaluated with 40 digits; of the numbers of
states for L = 4: enumeration of all 65,536 states.
"""

import numpy as np
import pytest
from numpy.typing import NDArray

from reweight.datasets.exact import lattice_log_degeneracies
from reweight.estimate import Estimate
from reweight.multistate import Solution, pairwise_start, solve
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.quantities.moments import Moments
from reweight.tally.assemble import assemble
from reweight.tally.leaves import LeafSums
from reweight.tally.levels import pour
from reweight.tally.nodes import COUNT, Nodes
from reweight.tally.panels import panel_width
from reweight.tally.run_tally import RunTally

Array = NDArray[np.float64]

# Levels -32, -24, -20 .. 20, 24, 32 of the 4 x 4 lattice.
FOUR_BY_FOUR = (2, 32, 64, 424, 1728, 6688, 13568, 20524, 13568, 6688, 1728, 424, 64, 32, 2)

# L: {T: (ln Z, E, C per site)}
EXACT = {
    4: {
        1.0: (2.043670087617, -1.997158440256, 0.023409397457),
        1.5: (1.382313369482, -1.950642561459, 0.200349872975),
        2.0: (1.069085444921, -1.755380288777, 0.605532657210),
        2.2: (0.992191663193, -1.618742821432, 0.750508311197),
        2.3: (0.960947265681, -1.541311492455, 0.794329749298),
        2.5: (0.910068313990, -1.379116482259, 0.812515229440),
        3.0: (0.830064590974, -1.017069626955, 0.603134714254),
        5.0: (0.735716897409, -0.456135369543, 0.119546188787),
    },
    8: {
        1.0: (2.011178708397, -1.997160204111, 0.023379564752),
        1.5: (1.349792575259, -1.951115430855, 0.197296124566),
        2.0: (1.036634091863, -1.745683170293, 0.714122602855),
        2.2: (0.960928975647, -1.568041763060, 1.058400728824),
        2.3: (0.931013283167, -1.455873591733, 1.170956769710),
        2.5: (0.884365449382, -1.222320643251, 1.100475889362),
        3.0: (0.816584525931, -0.841315427852, 0.483966471436),
        5.0: (0.734533553475, -0.428368058944, 0.097914171980),
    },
}
SIMULATED = np.array([1.7, 2.1, 2.6, 3.4])
LEAVES, ROWS_A_LEAF = 4, 1000
RELATIVE = 1e-10  # the tables' twelve digits leave 2e-11 of the smallest C


def lattice(length: int) -> tuple[Array, Array]:
    if length == 4:
        levels = np.array([-32.0, *np.arange(-24.0, 25.0, 4.0), 32.0])
        return levels, np.log(np.array(FOUR_BY_FOUR, dtype=float))
    return lattice_log_degeneracies(length)


def solution(per_run: Array, counts: Array, beta: Array, energies: Array) -> Solution:
    start = pairwise_start(per_run, counts, beta, energies)
    return solve(per_run.sum(axis=0), counts, beta, energies, start)


def estimate_from_expected_counts(length: int, *, panels: bool) -> Estimate:
    levels, log_degeneracies = lattice(length)
    log_weights = log_degeneracies - levels / SIMULATED[:, None]
    probabilities = np.exp(log_weights - log_weights.max(axis=1, keepdims=True))
    probabilities /= probabilities.sum(axis=1, keepdims=True)
    deviations = np.sqrt(probabilities @ levels**2 - (probabilities @ levels) ** 2)
    width = panel_width(float(deviations.min()), float(np.abs(np.diff(1 / SIMULATED)).max()))
    tallies, leaves = [], []
    for run in probabilities:
        expected = np.broadcast_to(ROWS_A_LEAF * run, (1, LEAVES, 1, levels.size))
        keys, sums = pour(levels, expected, width) if panels else (levels, np.array(expected))
        tally = RunTally(Nodes(width, discrete=not panels), (COUNT,), ())
        tally.row_count = LEAVES * ROWS_A_LEAF
        tallies.append(tally)
        leaves.append(LeafSums(keys=keys, sums=sums, rows=np.full(LEAVES, ROWS_A_LEAF)))
    ones = np.ones(SIMULATED.size)
    return Estimate.solved(
        assemble(tallies, leaves), (COUNT,), 1 / SIMULATED, [0] * SIMULATED.size, ones, ones, solution
    )


@pytest.mark.parametrize("panels", [False, True], ids=["on levels", "on panels"])
@pytest.mark.parametrize("length", [4, 8])
def test_expected_counts_give_back_the_published_averages(length: int, panels: bool) -> None:
    estimate = estimate_from_expected_counts(length, panels=panels)
    temperatures = np.array(list(EXACT[length]))
    log_partition, energy, heat_capacity = np.array(list(EXACT[length].values())).T * length**2

    moments = Moments(estimate.canonical(1 / temperatures), 1.0)

    assert estimate.assembly.discrete is not panels
    np.testing.assert_allclose(moments.origin, energy, rtol=RELATIVE)
    np.testing.assert_allclose(HeatCapacity().value(moments), heat_capacity, rtol=RELATIVE)
    on_scale = moments.canonical.log_partition - estimate.assembly.reference / temperatures
    np.testing.assert_allclose(np.diff(on_scale), np.diff(log_partition), rtol=RELATIVE)


@pytest.mark.parametrize("length", [4, 8])
def test_one_leaf_short_of_its_samples_is_noticed(length: int) -> None:
    """Negative control: the bound is tight enough to see one sample in sixteen thousand missing."""
    estimate = estimate_from_expected_counts(length, panels=False)
    levels, _ = lattice(length)
    estimate.weights[0, np.searchsorted(levels, -length * length)] -= 1.0
    energy = EXACT[length][2.3][1] * length**2

    mean = Moments(estimate.canonical(np.array([1 / 2.3])), 1.0).origin[0]

    assert abs(mean / energy - 1) > 1000 * RELATIVE
