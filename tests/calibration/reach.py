"""Coverage of 95 % intervals at the border of the reach, and beyond it, on systems with exact answers.

    python tests/calibration/reach.py [EXPERIMENTS]

Every experiment draws correlated runs from exact distributions, finds the reach of the mean energy and of the heat
capacity, and asks both at the two ends of their reach (the last supported temperature) and half and one and a half
inverse standard deviations of the energy beyond.  Noted is whether the 95 % interval held the exact answer.  None of
these systems was used when the rule was chosen.  Writes reach.csv beside this script; a table goes to the screen.
"""

from __future__ import annotations

import csv
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import reweight as rw
from reweight.answers.evaluate import evaluate
from reweight.datasets.exact import canonical, lattice_log_degeneracies
from reweight.datasets.exact_models import ladder_levels, ring_levels
from reweight.datasets.sampling import draw_gamma, draw_gaussian, draw_levels
from reweight.uncertainty.intervals import half_width

SEED = 20261201
CORRELATION = 0.9  # AR(1) coefficient; statistical inefficiency 19
INEFFICIENCY = 19
QUANTITIES = ("energy", "heat_capacity")
SIDES = {"border": 0.0, "just beyond": 0.5, "far beyond": 1.5}  # inverse standard deviations of the energy


@dataclass(frozen=True)
class System:
    """Exact means and a way to draw from them."""

    name: str
    temperatures: tuple[float, ...]
    draw: Callable[[float, int, np.random.Generator], np.ndarray]
    exact: Callable[[float], tuple[float, float]]


def levels_system(
    name: str, levels: tuple[np.ndarray, np.ndarray], temperatures: tuple[float, ...]
) -> System:
    def exact(temperature: float) -> tuple[float, float]:
        answer = canonical(*levels, [temperature])
        return float(answer.mean_energy[0]), float(answer.heat_capacity[0])

    return System(
        name, temperatures, lambda t, n, rng: draw_levels(*levels, t, n, rng, coefficient=CORRELATION), exact
    )


SYSTEMS = (
    levels_system("lattice 12 x 12", lattice_log_degeneracies(12), (2.0, 2.2, 2.4, 2.7)),
    levels_system("ring of 64", ring_levels(64), (0.7, 0.9, 1.2, 1.7)),
    levels_system("ladder of 40", ladder_levels(40), (3.0, 5.0, 8.0)),
    System(
        "Gamma, shape 80",
        (1.0, 1.1, 1.21),
        lambda t, n, rng: draw_gamma(80.0, t, n, rng, coefficient=CORRELATION),
        lambda t: (80.0 * t, 80.0),
    ),
    System(
        "Gaussian, width 10",
        (1.0, 1.12, 1.28),
        lambda t, n, rng: draw_gaussian(10.0, t, n, rng, coefficient=CORRELATION),
        lambda t: (-100.0 / t, 100.0 / t**2),
    ),
)


def experiment(
    system: System, independent: int, rng: np.random.Generator
) -> list[tuple[str, str, str, bool]]:
    """One set of runs; whether each interval held the truth, by quantity, end and side of the border."""
    runs = {str(t): system.draw(t, independent * INEFFICIENCY, rng) for t in system.temperatures}
    combined = rw.combine(runs, temperatures=system.temperatures, discard=0)
    outcomes = []
    for place, name in enumerate(QUANTITIES):
        within = rw.reach(combined, name)
        if within.empty:
            continue
        for end, temperature in (("cold", within.lowest), ("hot", within.highest)):
            if not np.isfinite(temperature):
                continue
            beta = 1 / temperature
            fluctuation = float(np.sqrt(system.exact(temperature)[1]) * temperature)
            outward = (1 if end == "cold" else -1) / fluctuation
            asked = beta + outward * np.array(list(SIDES.values()))
            (found,) = evaluate(combined, combined.quantities([name]), asked[asked > 0])
            error = found.variance.standard_error
            half = half_width(error, found.variance.degrees_of_freedom, 0.95)
            for i, (side, each) in enumerate(zip(SIDES, found.beta, strict=False)):
                exact = system.exact(1 / each)[place]
                outcomes.append((name, end, side, bool(abs(found.value[i] - exact) <= half[i])))
    return outcomes


def main(experiments: int) -> None:
    """Run every cell and write the table."""
    rows = []
    for number, system in enumerate(SYSTEMS):
        for independent in (100, 400):
            rng = np.random.default_rng([SEED, number, independent])
            started = time.perf_counter()
            counts: dict[tuple[str, str, str], list[bool]] = {}
            for _ in range(experiments):
                for name, end, side, held in experiment(system, independent, rng):
                    counts.setdefault((name, end, side), []).append(held)
            for (name, end, side), held in sorted(counts.items()):
                share = 100 * float(np.mean(held))
                error = float(np.sqrt(share * (100 - share) / len(held)))
                rows.append(
                    [system.name, independent, name, end, side, len(held), f"{share:.1f}", f"{error:.1f}"]
                )
                print(*rows[-1], sep="\t", flush=True)
            print(f"  {time.perf_counter() - started:.0f} s", flush=True)
    target = Path(__file__).with_suffix(".csv")
    with target.open("w", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(
            [
                "system",
                "independent_samples_a_run",
                "quantity",
                "end",
                "side",
                "intervals",
                "covered_percent",
                "error",
            ]
        )
        writer.writerows(rows)
    for name in QUANTITIES:
        for side in SIDES:
            cells = [(int(r[5]), float(r[6])) for r in rows if r[2] == name and r[4] == side]
            pooled = sum(n * share for n, share in cells) / sum(n for n, _ in cells)
            print(f"{name}, {side}: {pooled:.1f} % of {sum(n for n, _ in cells)} intervals held the truth")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 400)
