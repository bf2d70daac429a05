"""Error bars of E and C at 100 temperatures against the tally they come from: ``python speed_of_errors.py [REPETITIONS]``.

16 runs of 100,000 energies; values with linear-response errors, and the same as every answer comes: with effective
sample sizes and what the reach needs.
"""

from __future__ import annotations

import sys

import numpy as np
from gamma_study import energies, leaves_of, nodes_for, temperatures
from side_by_side import medians, say_rows, say_target, table_rows

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.density_of_states import DensityOfStates
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.quantities.moments import Moments
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.influence import block_sums, influence
from reweight.uncertainty.window import Variance, variance

RUNS, ROWS, ASKED = 16, 100_000, 100


def errors(
    combined: DensityOfStates, quantities: list[Quantity], beta: np.ndarray
) -> list[tuple[np.ndarray, Variance]]:
    """Values and their linear-response variances."""
    moments = Moments(combined.estimate.canonical(beta), combined.description.boltzmann_constant)
    return [
        (quantity.value(moments), variance(block_sums(combined.estimate, influence(quantity, moments))))
        for quantity in quantities
    ]


def main(repetitions: int) -> None:
    """Time and print."""
    samples = energies(RUNS, ROWS)
    nodes = nodes_for(samples)
    simulated = temperatures(RUNS)
    combined = rw.combine(
        {f"run {i}": run for i, run in enumerate(samples)}, temperatures=simulated, discard=0
    )
    beta = 1 / np.linspace(simulated[0], simulated[-1], ASKED)
    quantities: list[Quantity] = [MeanEnergy(), HeatCapacity()]
    taken = medians(
        {
            "tally": lambda: [leaves_of(run, nodes) for run in samples],
            "values and errors": lambda: errors(combined, quantities, beta),
            "with reach": lambda: evaluate(combined, quantities, beta),
        },
        repetitions,
    )
    rows = table_rows(taken, taken["tally"], "tallies")
    say_rows(f"{RUNS} runs x {ROWS:,} energies; E and C with errors at {ASKED} temperatures", rows)
    say_target("errors, in tallies", taken["values and errors"].wall / taken["tally"].wall, 1.0, at_most=True)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 15)
