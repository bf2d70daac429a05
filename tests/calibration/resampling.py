"""Intervals from resamples against the t interval, and the rank of the truth among resamples.

    python tests/calibration/resampling.py [summary]

Works through the cells that resampling.csv does not hold yet, as coverage.py does, with the same runs (grid.py: AR(1)
coefficient 0.9, weakest cut about 100) and other seeds.  In every experiment the runs are resampled in blocks, and six
answers are found in each resample.  Compared are

    t            the product's interval: linear-response error, quantile of Student's t
    rescaled     the product's interval with the shape of the resamples and the scale of that error
    deviation    standard deviation of the resamples, quantile of Student's t
    percentile, basic, BCa     B. Efron and R. Tibshirani, An Introduction to the Bootstrap (1993) (from memory)
    studentised  with the linear-response error of each resample to first order

The rank of the exact answer among the resamples is uniform if their spread is that of the errors (S. Talts et al.,
arXiv:1804.06788 (2018), from memory, says it of draws from a posterior): once for resamples reflected at the estimate, as
an interval for the truth asks for, once for these stretched to the linear-response error.

Shape letters: R resamples, K runs, B leaves of a run, T answers.
"""

from __future__ import annotations

import csv
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from coverage_summary import share
from grid import ANSWERS, Array, Asked, Cell, asked, combined_runs, draw, generator, systems
from level_difference import level_blocks, states_at_levels
from matplotlib.figure import Figure
from scipy.special import ndtr, ndtri, stdtrit
from scipy.stats import binom

from reweight.answers.evaluate import evaluate, moments_at, values
from reweight.answers.peak import peaks
from reweight.answers.resamples import draw_resamples
from reweight.answers.search import FIRST_DERIVATIVE, SECOND_DERIVATIVE, STEP
from reweight.density_of_states import DensityOfStates
from reweight.files import replacing
from reweight.tally.nodes import COUNT
from reweight.uncertainty.intervals import rescaled_interval
from reweight.uncertainty.resampling import Resamples, resampled_values
from reweight.uncertainty.window import Variance, variance

SEED = 20261205
LEVEL = 0.95
TAIL = (1 - LEVEL) / 2
EXPERIMENTS = 1000
RESAMPLES = 499  # so that ranks fall evenly on 20 bins
RANK_BINS = 20
PEAK_POINTS = 81  # between the coldest and the hottest run; a parabola through three of them gives the rest
NAMES = ("energy", "heat_capacity", "order.mean")
INTERVALS = ("t", "rescaled", "deviation", "percentile", "basic", "BCa", "studentised")
TARGET = Path(__file__).with_suffix(".csv")
CELLS = tuple(Cell(system, 0.9, n, 100) for n in (100, 300, 1000) for system in (0, 1))


@dataclass(frozen=True)
class Answers:
    """Six answers (T,), their block sums (B, T) run by run, and all of them in every resample (R, T)."""

    value: Array
    blocks: list[Array]
    resampled: Array


def answers(
    combined: DensityOfStates, ask: Asked, spacing: float, seed: int
) -> tuple[Answers, Resamples] | None:
    """Everything asked of one set of runs; None if the peak is not inside or a level was never seen."""
    estimate = combined.estimate
    peak = peaks(combined, lowest=min(ask.temperatures), highest=max(ask.temperatures), beyond_reach=True)[0]
    inside = states_at_levels(combined, ask.levels, spacing)
    if peak.at_edge or inside is None:
        return None
    resamples = draw_resamples(combined, RESAMPLES, seed=seed)
    quantities = combined.quantities(NAMES)
    found = evaluate(combined, quantities, np.array([1 / ask.temperature]))
    drawn = resampled_values(resamples, quantities, moments_at(combined, np.array([1 / ask.temperature])))

    with np.errstate(divide="ignore", invalid="ignore"):  # a level may be missing from a resample
        volumes = resamples.weights([COUNT], slice(0, resamples.count))[COUNT] @ inside.T
        level_drawn = np.log(volumes[:, :1] / volumes[:, 1:])
    level_drawn[~np.isfinite(level_drawn)] = np.nan

    grid = np.linspace(1 / max(ask.temperatures), 1 / min(ask.temperatures), PEAK_POINTS)
    (curves,) = resampled_values(
        resamples, combined.quantities(["heat_capacity"]), moments_at(combined, grid)
    )
    return (
        Answers(
            np.array(
                [
                    *(each.value[0] for each in found),
                    np.log(np.divide(*(inside @ estimate.weights[0]))),
                    peak.temperature,
                    peak.height,
                ]
            ),
            [
                np.concatenate(parts, axis=1)
                for parts in zip(
                    *(each.blocks for each in found),
                    level_blocks(combined, inside),
                    peak_blocks(combined, 1 / peak.temperature),
                    strict=True,
                )
            ],
            np.concatenate([*drawn, level_drawn, highest(grid, curves)], axis=1),
        ),
        resamples,
    )


def peak_blocks(combined: DensityOfStates, beta: float) -> list[Array]:
    """Block sums of the influence on position and height of a peak of the heat capacity, one array (B, 2) a run."""
    (capacity,) = combined.quantities(["heat_capacity"])
    step = STEP * beta / np.sqrt(values(combined, capacity, np.array([beta]))[0])
    (around,) = evaluate(combined, [capacity], beta + step * np.arange(-4, 5))
    scale = step / (around.value @ SECOND_DERIVATIVE * beta**2)  # dT = -dbeta / beta**2, dbeta = -dy' / y''
    return [np.stack([scale * (block @ FIRST_DERIVATIVE), block[:, 4]], axis=1) for block in around.blocks]


def highest(grid: Array, curves: Array) -> Array:
    """Temperature and height of the highest point of curves over inverse temperatures, shape (R, 2)."""
    place = np.clip(np.nanargmax(np.nan_to_num(curves, nan=-np.inf), axis=1), 1, grid.size - 2)
    row = np.arange(curves.shape[0])
    left, middle, right = (curves[row, place + shift] for shift in (-1, 0, 1))
    bend = np.minimum(left - 2 * middle + right, -np.finfo(float).tiny)
    shift = np.clip((left - right) / (2 * bend), -1, 1)
    top = grid[place] + shift * (grid[1] - grid[0])
    return np.stack([1 / top, middle - (left - right) * shift / 4], axis=1)


def intervals(found: Answers, spread: Variance, resamples: Resamples) -> Array:
    """All kinds of interval, shape (kinds, T, 2)."""
    value, drawn, error = found.value, found.resampled, spread.standard_error
    quantile = stdtrit(spread.degrees_of_freedom, 1 - TAIL)
    low, high = np.nanquantile(drawn, [TAIL, 1 - TAIL], axis=0)
    deviation = np.nanstd(drawn, axis=0, ddof=1)
    studied = (drawn - value) / first_order_errors(found.blocks, spread, resamples)
    t_low, t_high = np.nanquantile(studied, [TAIL, 1 - TAIL], axis=0)
    return np.array(
        [
            np.stack([value - quantile * error, value + quantile * error], axis=-1),
            rescaled_interval(value, drawn, error, spread.degrees_of_freedom, LEVEL),
            np.stack([value - quantile * deviation, value + quantile * deviation], axis=-1),
            np.stack([low, high], axis=-1),
            np.stack([2 * value - high, 2 * value - low], axis=-1),
            accelerated(found, resamples),
            np.stack([value - t_high * error, value - t_low * error], axis=-1),
        ]
    )


def first_order_errors(blocks: Sequence[Array], spread: Variance, resamples: Resamples) -> Array:
    """Linear-response error in every resample, the influence functions taken as they are, shape (R, T)."""
    total = np.zeros((resamples.count, blocks[0].shape[1]))
    for block, by_run, times in zip(blocks, spread.by_run, resamples.multiplicities, strict=True):
        drawn = times.astype(float)
        square = drawn @ block**2 - (drawn @ block) ** 2 / block.shape[0]
        total += square * by_run / (block**2).sum(axis=0)
    return np.sqrt(total)


def accelerated(found: Answers, resamples: Resamples) -> Array:
    """BCa interval, its acceleration from sums over whole blocks, shape (T, 2)."""
    drawn, count = found.resampled, resamples.count
    below = np.clip(np.nanmean(drawn < found.value, axis=0), 1 / (count + 1), count / (count + 1))
    sums = []
    for block, length in zip(found.blocks, resamples.block_lengths, strict=True):
        sums.append(np.add.reduceat(block, np.arange(0, block.shape[0], length), axis=0))
    coarse = np.concatenate(sums)
    acceleration = (coarse**3).sum(axis=0) / (6 * (coarse**2).sum(axis=0) ** 1.5)
    bias = ndtri(below)
    ends = []
    for normal in (ndtri(TAIL), ndtri(1 - TAIL)):
        level = ndtr(bias + (bias + normal) / (1 - acceleration * (bias + normal)))
        ends.append([np.nanquantile(drawn[:, t], level[t]) for t in range(level.size)])
    return np.array(ends).T


def ranks(found: Answers, spread: Variance, exact: Array) -> Array:
    """Share of resamples, reflected at the estimate, below the truth; the same for stretched ones, shape (2, T)."""
    reflected = 2 * found.value - found.resampled
    stretch = spread.standard_error / np.nanstd(found.resampled, axis=0, ddof=1)
    stretched = found.value + (reflected - found.value) * stretch
    return np.array([np.nanmean(each < exact, axis=0) for each in (reflected, stretched)])


COLUMNS = (
    *("system", "independent_samples_a_run", "answer", "experiments", "answered"),
    *(f"covered_{kind}" for kind in INTERVALS),
    *("deviation_over_error", "bias_in_errors"),
    *(f"rank_{number}" for number in range(RANK_BINS)),
    *(f"stretched_rank_{number}" for number in range(RANK_BINS)),
    "seconds",
)


def run_cell(cell: Cell, experiments: int, seed: int = SEED) -> list[dict[str, str]]:
    """One row an answer."""
    started = time.process_time()
    ask, rng = asked(cell), generator(cell, seed)
    held, ranked, ratios, biases = [], [], [], []
    for number in range(experiments):
        combined = combined_runs(ask.temperatures, draw(cell, ask.temperatures, rng))
        made = answers(combined, ask, systems()[cell.system].spacing, number)
        if made is None:
            continue
        found, resamples = made
        spread = variance(found.blocks)
        ends = intervals(found, spread, resamples)
        held.append((ends[:, :, 0] <= ask.exact) & (ask.exact <= ends[:, :, 1]))
        ranked.append(ranks(found, spread, ask.exact))
        ratios.append(np.nanstd(found.resampled, axis=0, ddof=1) / spread.standard_error)
        biases.append((np.nanmean(found.resampled, axis=0) - found.value) / spread.standard_error)
    places = np.minimum((np.array(ranked) * RANK_BINS).astype(int), RANK_BINS - 1)
    seconds = time.process_time() - started
    rows = []
    for t, answer in enumerate(ANSWERS):
        numbers = (
            *(cell.key[0], cell.key[2], answer, experiments, len(held)),
            *np.sum(held, axis=0)[:, t],
            *(f"{np.mean(each, axis=0)[t]:.4f}" for each in (ratios, biases)),
            *np.bincount(places[:, 0, t], minlength=RANK_BINS),
            *np.bincount(places[:, 1, t], minlength=RANK_BINS),
            f"{seconds:.0f}",
        )
        rows.append(dict(zip(COLUMNS, map(str, numbers), strict=True)))
    return rows


def read_rows() -> list[dict[str, str]]:
    """Rows of the cells that are done."""
    if not TARGET.exists():
        return []
    with TARGET.open(newline="") as stream:
        return list(csv.DictReader(stream))


def main() -> None:
    """All cells that are not there yet."""
    rows = read_rows()
    done = {(row["system"], row["independent_samples_a_run"]) for row in rows}
    for cell in CELLS:
        if (cell.key[0], cell.key[2]) in done:
            continue
        rows += run_cell(cell, EXPERIMENTS)
        with replacing(TARGET, force=True) as beside, beside.open("w", newline="") as stream:
            writer = csv.DictWriter(stream, COLUMNS, lineterminator="\n")
            writer.writeheader()
            writer.writerows(rows)
        print(*cell.key, rows[-1]["seconds"] + " s", sep="\t", flush=True)


def summarise(rows: list[dict[str, str]]) -> None:
    """Print coverage by kind of interval, and draw the ranks."""
    for length in dict.fromkeys(row["independent_samples_a_run"] for row in rows):
        print(f"\n{length} independent samples a run\n")
        print("| answer | " + " | ".join(INTERVALS) + " | deviation / error |")
        print("| --- |" + " --- |" * (len(INTERVALS) + 1))
        for answer in ANSWERS:
            here = [
                row for row in rows if row["independent_samples_a_run"] == length and row["answer"] == answer
            ]
            total = sum(int(row["answered"]) for row in here)
            shares = [share(sum(int(row[f"covered_{kind}"]) for row in here), total) for kind in INTERVALS]
            ratio = np.mean([float(row["deviation_over_error"]) for row in here])
            print(f"| {answer} | " + " | ".join(shares) + f" | {ratio:.3f} |")
    draw_ranks(rows, TARGET.with_suffix(".png"))


def draw_ranks(rows: list[dict[str, str]], picture: Path) -> None:
    """Ranks of the truth among resamples, all cells together, one frame an answer."""
    figure = Figure(figsize=(10, 5.5), layout="constrained")
    frames = figure.subplots(2, 3, sharex=True, sharey=True)
    for frame, answer in zip(frames.flat, ANSWERS, strict=True):
        here = [row for row in rows if row["answer"] == answer]
        total = sum(int(row["answered"]) for row in here)
        low, high = (
            float(binom.ppf(tail, total, 1 / RANK_BINS)) * RANK_BINS / total for tail in (0.005, 0.995)
        )
        frame.axhspan(low, high, color="0.9", zorder=0)
        for name, style in (("rank", "0.55"), ("stretched_rank", "black")):
            summed = np.array([sum(int(row[f"{name}_{b}"]) for row in here) for b in range(RANK_BINS)])
            frame.stairs(
                summed * RANK_BINS / total, np.linspace(0, 1, RANK_BINS + 1), color=style, linewidth=1.3
            )
        frame.set_title(answer, fontsize=10)
        frame.set_ylim(0, 1.6)
    for frame in frames[-1]:
        frame.set_xlabel("rank of the truth")
    for frame in frames[:, 0]:
        frame.set_ylabel("frequency, uniform = 1")
    figure.suptitle(
        "Rank of the exact answer among resamples.  Grey: resamples reflected at the estimate; black: also stretched\n"
        "to the linear-response error.  Band: 99 % of a uniform bin.",
        fontsize=9,
    )
    figure.savefig(picture, dpi=110, metadata={"Software": None})


if __name__ == "__main__":
    if sys.argv[1:] == ["summary"]:
        summarise(read_rows())
    else:
        main()
