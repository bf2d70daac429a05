"""Resampling against the tally of the same data: ``python speed_of_resampling.py [REPETITIONS]``.

2000 resamples of energy and heat capacity at 100 temperatures, the peak, and one observable at 100 temperatures, on 16 runs
of 1,000,000 and of 100,000 rows; 1000 resamples of the large study (energy and three observables at 100 temperatures).
"""

from __future__ import annotations

import sys

import numpy as np
from gamma_study import energies, temperatures
from large_study import DESCRIPTION, FRAMES, RUNS, TEMPERATURES, chunks, study
from side_by_side import medians, say_rows, say_target, table_rows

import reweight as rw
from reweight.answers.resamples import draw_resamples
from reweight.combining import tally_sources
from reweight.density_of_states import Description, ObservableDescription
from reweight.runs import Source

ASKED = 100


def small(rows: int, repetitions: int) -> float:
    """Print the table of 16 runs; return the ratio."""
    simulated = temperatures(16)
    samples = energies(16, rows)
    description = Description(observables=(ObservableDescription(name="root"),))
    columns = [np.stack([run, np.sqrt(run)], axis=1) for run in samples]

    def tally() -> object:
        sources = [
            Source(name=str(i), beta=1 / simulated[i], chunks=lambda i=i: iter([columns[i]]), discard=0)
            for i in range(16)
        ]
        return [each.complete() for each in tally_sources(sources, description)]

    combined = rw.combine(
        {str(i): {"energy": run[:, 0], "root": run[:, 1]} for i, run in enumerate(columns)},
        temperatures=simulated,
        discard=0,
    )
    asked = np.linspace(simulated[0], simulated[-1], ASKED)

    def resampling() -> object:
        resamples = draw_resamples(combined, 2000)
        return (
            rw.curve(combined, asked, of=["energy", "heat_capacity", "root.mean"], resamples=resamples),
            rw.peaks(combined, resamples=resamples),
        )

    taken = medians({"tally": tally, "2000 resamples": resampling}, repetitions)
    say_rows(
        f"16 runs x {rows:,} rows of an energy and an observable",
        table_rows(taken, taken["tally"], "tallies"),
    )
    return taken["2000 resamples"].wall / taken["tally"].wall


def large(repetitions: int) -> float:
    """Print the table of the large study; return the ratio."""
    combined = study(FRAMES)
    rows = [np.concatenate(list(chunks(i, FRAMES))) for i in range(RUNS)]
    beta = DESCRIPTION.inverse_temperature(TEMPERATURES)
    asked = np.linspace(305.0, 415.0, ASKED)

    def tally() -> object:
        sources = [
            Source(name=str(i), beta=float(beta[i]), chunks=lambda i=i: iter([rows[i]]), discard=0)
            for i in range(RUNS)
        ]
        return [each.complete() for each in tally_sources(sources, DESCRIPTION)]

    def resampling() -> object:
        resamples = draw_resamples(combined, 1000)
        of = ["energy", "a.mean", "b.mean", "c.mean"]
        return rw.curve(combined, asked, of=of, resamples=resamples, beyond_reach=True)

    taken = medians({"tally": tally, "1000 resamples": resampling}, repetitions)
    say_rows(
        f"{RUNS} runs x {FRAMES:,} frames, three observables with two moments each",
        table_rows(taken, taken["tally"], "tallies"),
    )
    return taken["1000 resamples"].wall / taken["tally"].wall


def main(repetitions: int) -> None:
    """Time and print."""
    say_target("2000 resamples, in tallies", small(1_000_000, repetitions), 30.0, at_most=True)
    small(100_000, repetitions)
    say_target("1000 resamples, in tallies", large(repetitions), 60.0, at_most=True)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 3)
