"""The study all timings use: 200 quadratic degrees of freedom (Gamma distributed energies), neighbours overlapping well."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.estimate import Estimate
from reweight.memory import keep_freed_memory
from reweight.multistate import Solution, pairwise_start, solve
from reweight.tally.assemble import assemble
from reweight.tally.leaves import LeafSums, ScatteredSums
from reweight.tally.nodes import COUNT, Nodes
from reweight.tally.panels import panel_width
from reweight.tally.run_tally import RunTally

__all__ = ["energies", "leaves_of", "nodes_for", "solved", "temperatures"]

SHAPE = 100.0

keep_freed_memory()  # as `combine` does

Array = NDArray[np.float64]


def temperatures(run_count: int) -> Array:
    """Geometric ladder from 1 to 2.4, shape (K,)."""
    return np.geomspace(1.0, 2.4, run_count)


def energies(run_count: int, rows: int, seed: int = 1) -> Array:
    """Independent samples of all runs, shape (K, N)."""
    rng = np.random.default_rng(seed)
    samples = rng.standard_gamma(SHAPE, (run_count, rows))
    samples *= temperatures(run_count)[:, None]
    return samples


def nodes_for(samples: Array) -> Nodes:
    """Panels as the product chooses them, from the first 4096 rows of every run."""
    beta = 1 / temperatures(samples.shape[0])
    deviation = float(samples[:, :4096].std(axis=1).min())
    return Nodes(panel_width(deviation, float(np.abs(np.diff(beta)).max(initial=0.0))))


def leaves_of(samples: Array, nodes: Nodes) -> tuple[RunTally, LeafSums | ScatteredSums]:
    """Tally one run, shape (N,)."""
    tally = RunTally(nodes, (COUNT,), ())
    tally.add(samples[:, None])
    return tally, tally.complete()[0]


def solved(tallied: list[tuple[RunTally, LeafSums | ScatteredSums]]) -> Estimate:
    """Common nodes, and the free energies; every sample counts as independent."""
    run_count = len(tallied)
    assembly = assemble([tally for tally, _ in tallied], [leaves for _, leaves in tallied])
    ones = np.ones(run_count)
    return Estimate.solved(
        assembly, (COUNT,), 1 / temperatures(run_count), [0] * run_count, ones, ones, _solution
    )


def _solution(per_run: Array, counts: Array, beta: Array, nodes: Array) -> Solution:
    start = pairwise_start(per_run, counts, beta, nodes)
    return solve(per_run.sum(axis=0), counts, beta, nodes, start)
