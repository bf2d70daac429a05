"""Tally and solve, against pymbar on the same samples: ``python speed_against_reference.py [REPETITIONS]``.

16 runs of 20,000 samples.  Both sides start from the bare energies of the runs and end with the free energies; the
reduced energies pymbar wants (K, K N) are made beforehand and cost it nothing.  pymbar without JAX; its default, and
two-run (BAR) initial values with each of its solvers.  Targets are set for the default and for the adaptive solver; the
default and hybr solvers from two-run starts are sometimes faster, sometimes slower than the adaptive one.
"""

from __future__ import annotations

import functools
import logging
import sys
import warnings

import numpy as np
from gamma_study import energies, leaves_of, nodes_for, solved, temperatures
from side_by_side import Taken, medians, say_rows, say_target, table_rows

logging.disable(logging.WARNING)  # pymbar announces that it runs without JAX
warnings.simplefilter("ignore")

from pymbar import MBAR  # noqa: E402

RUNS, ROWS = 16, 20_000
OURS_A_ROUND = 11  # a few milliseconds need repetitions to be known
TARGET_ADAPTIVE, TARGET_DEFAULT = 200.0, 500.0

SETTINGS: dict[str, dict[str, object]] = {
    "default": {},
    "two-run start, default solver": {"initialize": "BAR"},
    "two-run start, robust": {"initialize": "BAR", "solver_protocol": "robust"},
    "two-run start, adaptive": {
        "initialize": "BAR",
        "solver_protocol": ({"method": "adaptive", "options": {"min_sc_iter": 0}},),
    },
    "two-run start, hybr": {"initialize": "BAR", "solver_protocol": ({"method": "hybr"},)},
}


def main(repetitions: int) -> None:
    """Time, compare the free energies, print."""
    samples = energies(RUNS, ROWS)
    nodes = nodes_for(samples)
    reduced = (samples.ravel() - samples.mean()) / temperatures(RUNS)[:, None]
    counts = np.full(RUNS, ROWS)

    def ours() -> np.ndarray:
        return solved([leaves_of(run, nodes) for run in samples]).solution.free_energies

    rounds = []
    for _ in range(repetitions):
        rounds.append(medians({"ours": ours}, OURS_A_ROUND))
        for name, setting in SETTINGS.items():
            rounds.append(medians({name: functools.partial(MBAR, reduced, counts, **setting)}, 1))
    taken = {
        name: Taken(*np.median([each[name] for each in rounds if name in each], axis=0))
        for name in ("ours", *SETTINGS)
    }
    mine = taken["ours"]

    estimate = solved([leaves_of(run, nodes) for run in samples])
    shift = (estimate.assembly.reference - samples.mean()) / temperatures(RUNS)
    free = estimate.solution.free_energies + shift
    theirs = MBAR(reduced, counts, initialize="BAR").f_k
    worst = float(np.abs(free - free[0] - theirs + theirs[0]).max())
    shown = {"ours": mine} | {f"pymbar, {name}": taken[name] for name in SETTINGS}
    say_rows(
        f"{RUNS} runs x {ROWS:,} samples; free energies differ by at most {worst:.1e}",
        table_rows(shown, mine, "ours"),
    )
    say_target(
        "pymbar's adaptive solver from two-run starts, times ours",
        taken["two-run start, adaptive"].wall / mine.wall,
        TARGET_ADAPTIVE,
    )
    say_target("pymbar's default, times ours", taken["default"].wall / mine.wall, TARGET_DEFAULT)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 3)
