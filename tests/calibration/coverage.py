"""Coverage of 95 % intervals over a grid of correlations, lengths and links, on two systems with exact answers.

    python tests/calibration/coverage.py [summary]

Works through the cells that coverage.csv beside this script does not hold yet, and writes the file anew after each: it
can be stopped and started again at any time, and a cell comes out the same in any sitting.  ``summary`` prints the tables
and draws coverage.png from what is there.

Runs (see grid.py) are combined as users' runs are; nothing is discarded, since there is no transient.  Six answers are
asked with their intervals.

Shape letters: N rows of a run.
"""

from __future__ import annotations

import csv
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from coverage_summary import summarise
from grid import ANSWERS, Array, Asked, Cell, asked, cells, combined_runs, draw, generator, systems
from level_difference import level_blocks, states_at_levels
from numpy.typing import NDArray

from reweight.answers.bins import FEWEST_VISITS
from reweight.answers.evaluate import evaluate
from reweight.answers.peak import peaks
from reweight.checks.length import PROMISED_INDEPENDENT
from reweight.checks.links import SOUND_SHARING
from reweight.density_of_states import DensityOfStates, RunRecord
from reweight.errors import ConvergenceError, DisconnectedError
from reweight.files import replacing
from reweight.series.time_scales import TimeScales, time_scales
from reweight.uncertainty.intervals import half_width
from reweight.uncertainty.window import variance

LEVEL = 0.95
DISAGREEMENT = 1.5  # block over series estimate of the inefficiency
FEWEST_SLOW_TIMES = 20
TARGET = Path(__file__).with_suffix(".csv")


@dataclass(frozen=True)
class Outcome:
    """Values, standard errors, half widths and whether the program calls an answer supported, six each; warnings."""

    value: Array
    error: Array
    half: Array
    supported: NDArray[np.bool_]
    block_larger: float
    short: float
    few_slow_times: float
    weak_cut: bool


def level_difference(
    combined: DensityOfStates, levels: tuple[float, float], spacing: float
) -> tuple[float, float, float, bool]:
    """Difference of ln g: value, standard error, half width, and whether both levels are well visited."""
    inside = states_at_levels(combined, levels, spacing)
    if inside is None:
        return np.nan, np.nan, np.nan, False
    spread = variance(level_blocks(combined, inside))
    return (
        float(np.log(np.divide(*(inside @ combined.estimate.weights[0])))),
        float(spread.standard_error[0]),
        float(half_width(spread.standard_error, spread.degrees_of_freedom, LEVEL)[0]),
        bool(((inside > 0) @ combined.estimate.independent).min() >= FEWEST_VISITS),
    )


def energy_scales(run: RunRecord) -> TimeScales:
    """Inefficiency of the energy from the series and from blocks."""
    thinned = run.thinned
    return time_scales(
        thinned.means()[:, 0],
        thinned.within_variance()[:, 0],
        group=thinned.group,
        block=int(run.leaf_rows[0]) // thinned.group,
    )


def experiment(cell: Cell, ask: Asked, rng: np.random.Generator) -> Outcome | None:
    """One set of runs and its answers; None if the program refuses to join them."""
    system = systems()[cell.system]
    runs = draw(cell, ask.temperatures, rng)
    try:
        combined = combined_runs(ask.temperatures, runs)
    except (DisconnectedError, ConvergenceError):
        return None
    table: list[tuple[float, float, float, bool]] = []
    names = ("energy", "heat_capacity", "order.mean")
    for found in evaluate(combined, combined.quantities(names), np.array([1 / ask.temperature])):
        errors = found.variance.standard_error
        halves = half_width(errors, found.variance.degrees_of_freedom, LEVEL)
        table.append((float(found.value[0]), float(errors[0]), float(halves[0]), bool(found.within_reach[0])))
    table.append(level_difference(combined, ask.levels, system.spacing))
    peak = peaks(
        combined, lowest=min(ask.temperatures), highest=max(ask.temperatures), level=LEVEL, beyond_reach=True
    )[0]
    # a maximum on a limit is no peak: the program gives its position no interval and says so
    missing = np.nan if peak.at_edge else 1.0
    for place, spread, interval in (
        (peak.temperature, peak.temperature_standard_error, peak.temperature_interval),
        (peak.height, peak.height_standard_error, peak.height_interval),
    ):
        half = missing * (interval[1] - interval[0]) / 2
        table.append((place, spread, half, peak.within_reach and peak.stands_out))
    value, error, half_widths, supported = (np.array(column) for column in zip(*table, strict=True))
    scales = [energy_scales(run) for run in combined.runs]
    ratio = np.array([each.blocks.value / each.series.value for each in scales])
    independent = cell.rows / np.array([each.slower.value for each in scales])
    return Outcome(
        value,
        error,
        half_widths,
        supported,
        float(np.mean(ratio > DISAGREEMENT)),
        float(np.mean(independent < PROMISED_INDEPENDENT)),
        float(np.mean(independent < FEWEST_SLOW_TIMES)),
        bool(combined.sharing.min() < SOUND_SHARING),
    )


COLUMNS = (
    *("system", "coefficient", "independent_samples_a_run", "shared_wanted", "shared_expected", "runs"),
    *("coldest", "hottest", "asked_at", "experiments", "refused", "answer", "answered", "covered"),
    *(
        "supported",
        "covered_supported",
        "unwarned",
        "covered_unwarned",
        "error_over_scatter",
        "bias_in_errors",
    ),
    *("share_block_larger", "share_short", "share_few_slow_times", "share_weak_cut", "seconds"),
)


def run_cell(cell: Cell, experiments: int, rng: np.random.Generator) -> list[dict[str, str]]:
    """One row an answer."""
    started = time.process_time()
    ask = asked(cell)
    outcomes = [experiment(cell, ask, rng) for _ in range(experiments)]
    made = [outcome for outcome in outcomes if outcome is not None]
    value = np.array([outcome.value for outcome in made])
    error = np.array([outcome.error for outcome in made])
    half = np.array([outcome.half for outcome in made])
    supported = np.array([outcome.supported for outcome in made])
    warned = np.array(
        [outcome.short > 0 or outcome.few_slow_times > 0 or outcome.weak_cut for outcome in made]
    )
    answered = np.isfinite(half)
    covered = answered & (np.abs(value - ask.exact) <= half)
    seconds = time.process_time() - started
    rows = []
    for place, answer in enumerate(ANSWERS):
        here = answered[:, place]
        backed = here & supported[:, place]
        unwarned = backed & ~warned
        scatter = float(value[here, place].std()) if here.sum() > 1 else np.nan
        numbers = (
            *cell.key,
            f"{ask.sharing:.1f}",
            len(ask.temperatures),
            f"{min(ask.temperatures):.4g}",
            f"{max(ask.temperatures):.4g}",
            f"{ask.temperature:.4g}",
            experiments,
            experiments - len(made),
            answer,
            here.sum(),
            covered[:, place].sum(),
            backed.sum(),
            covered[backed, place].sum(),
            unwarned.sum(),
            covered[unwarned, place].sum(),
            f"{np.sqrt(np.sum(error[here, place] ** 2) / here.sum()) / scatter:.3f}",
            f"{np.sum(value[here, place] - ask.exact[place]) / here.sum() / scatter:.3f}",
            f"{np.mean([outcome.block_larger for outcome in made]):.4f}",
            f"{np.mean([outcome.short for outcome in made]):.4f}",
            f"{np.mean([outcome.few_slow_times for outcome in made]):.4f}",
            f"{np.mean([outcome.weak_cut for outcome in made]):.4f}",
            f"{seconds:.0f}",
        )
        rows.append(dict(zip(COLUMNS, map(str, numbers), strict=True)))
    return rows


def read_rows() -> list[dict[str, str]]:
    if not TARGET.exists():
        return []
    with TARGET.open(newline="") as stream:
        return list(csv.DictReader(stream))


def write_rows(rows: list[dict[str, str]]) -> None:
    """Replace the whole file, so that it never holds half a cell."""
    with replacing(TARGET, force=True) as beside, beside.open("w", newline="") as stream:
        writer = csv.DictWriter(stream, COLUMNS, lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def run() -> None:
    """All cells that are not there yet."""
    rows = read_rows()
    done = {tuple(row[name] for name in COLUMNS[:4]) for row in rows}
    for cell in cells():
        if cell.key in done:
            continue
        new = run_cell(cell, cell.experiments, generator(cell))
        rows += new
        write_rows(rows)
        shares = (f"{100 * int(row['covered']) / max(1, int(row['answered'])):.1f}" for row in new)
        print(*cell.key, *shares, new[0]["seconds"] + " s", sep="\t", flush=True)


if __name__ == "__main__":
    if sys.argv[1:] == ["summary"]:
        summarise(read_rows(), len(list(cells())), TARGET.with_suffix(".png"))
    else:
        run()
