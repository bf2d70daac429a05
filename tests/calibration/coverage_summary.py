"""Tables and the picture of the coverage study, from its cells (see coverage.py)."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from pathlib import Path

from matplotlib.figure import Figure
from scipy.stats import beta, binomtest

Row = dict[str, str]

FEWEST_INDEPENDENT = 100
FEWEST_SHARED = 10.0
NOMINAL = 95.0
POOLED_BETWEEN = (94.0, 96.0)
LOWEST_CELL = 93.5
CONFIDENCE = 0.999
MARKERS = {"0.0": "o", "0.9": "s", "0.99": "^"}
SIDE = {"100": -1, "10": 0, "3": 1}
APART = 1.4  # ratio between places across


def promised(row: Row) -> bool:
    """Whether intervals within reach are promised to cover in this cell, by its true parameters.

    A cell is within reach if most of its experiments say so.
    """
    long_enough = int(row["independent_samples_a_run"]) >= FEWEST_INDEPENDENT
    within_reach = 2 * int(row["supported"]) >= int(row["answered"])
    return long_enough and float(row["shared_expected"]) >= FEWEST_SHARED and within_reach


def seldom_within_reach(row: Row) -> bool:
    """Whether only a minority of experiments, favoured by chance, call the answer within reach."""
    long_enough = int(row["independent_samples_a_run"]) >= FEWEST_INDEPENDENT
    shared = float(row["shared_expected"]) >= FEWEST_SHARED
    return long_enough and shared and not promised(row) and int(row["supported"]) > 0


def counts(row: Row) -> tuple[int, int]:
    """Intervals that hold the truth, and all of them: those within reach if promised, else those answered."""
    if promised(row):
        return int(row["covered_supported"]), int(row["supported"])
    return int(row["covered"]), int(row["answered"])


def pooled(rows: Iterable[Row]) -> tuple[int, int]:
    """Sums over cells."""
    pairs = [counts(row) for row in rows]
    return sum(covered for covered, _ in pairs), sum(total for _, total in pairs)


def share(covered: int, total: int) -> str:
    """Percentage with its standard error in brackets, in units of the last digit."""
    if total == 0:
        return "none"
    part = covered / total
    error = 1000 * (part * (1 - part) / total) ** 0.5
    return f"{100 * part:.1f}({max(1, round(error))})"


def excluded(covered: int, total: int) -> bool:
    """Whether the one-sided binomial bound rules out the lowest coverage a cell may have."""
    return total > covered and 100 * beta.ppf(CONFIDENCE, covered + 1, total - covered) < LOWEST_CELL


def table(rows: list[Row], regions: dict[str, Callable[[Row], bool]]) -> list[str]:
    """One line an answer, one column a region."""
    answers = list(dict.fromkeys(row["answer"] for row in rows))
    lines = ["| answer | " + " | ".join(regions) + " |", "| --- |" + " --- |" * len(regions)]
    for answer in answers:
        cells = [
            share(*pooled(row for row in rows if row["answer"] == answer and inside(row)))
            for inside in regions.values()
        ]
        lines.append(f"| {answer} | " + " | ".join(cells) + " |")
    return lines


def unwarned(rows: list[Row]) -> list[str]:
    """Coverage of what the program gives without any warning, whatever the cell; and how often that is."""
    lines = ["| answer | covered | share of all intervals |", "| --- | --- | --- |"]
    for answer in dict.fromkeys(row["answer"] for row in rows):
        here = [row for row in rows if row["answer"] == answer]
        total, covered, asked = (
            sum(int(row[name]) for row in here) for name in ("unwarned", "covered_unwarned", "experiments")
        )
        lines.append(f"| {answer} | {share(covered, total)} | {100 * total / asked:.0f} % |")
    return lines


def length_region(independent: int) -> Callable[[Row], bool]:
    """Promised cells of one length."""
    return lambda row: promised(row) and int(row["independent_samples_a_run"]) == independent


def system_region(system: str) -> Callable[[Row], bool]:
    """Promised cells of one system."""
    return lambda row: promised(row) and row["system"] == system


def summarise(rows: list[Row], cell_count: int, picture: Path) -> None:
    """Print everything; draw the picture."""
    done = {tuple(row[name] for name in list(row)[:4]): float(row["seconds"]) for row in rows}
    print(f"{len(done)} of {cell_count} cells, {sum(done.values()) / 3600:.2f} core hours\n")
    by_length: dict[str, Callable[[Row], bool]] = {
        f"{n} independent": length_region(n) for n in (100, 300, 1000)
    }
    print(
        "Within the promise (at least 100 independent samples, weakest cut at least 10, mostly within reach):\n"
    )
    regions = {
        "all promised": promised,
        **by_length,
        "one phase": system_region("one phase"),
        "two phases": system_region("two phases"),
    }
    print(*table(rows, regions), sep="\n")
    print("\nOutside it, all intervals the program gives:\n")
    print(
        *table(
            rows,
            {
                "30 independent, cut >= 10": lambda row: (
                    not promised(row) and float(row["shared_expected"]) >= FEWEST_SHARED
                ),
                "cut 3, 30 independent": lambda row: (
                    row["shared_wanted"] == "3" and row["independent_samples_a_run"] == "30"
                ),
                "cut 3, 100 or more": lambda row: (
                    row["shared_wanted"] == "3" and row["independent_samples_a_run"] != "30"
                ),
            },
        ),
        sep="\n",
    )
    print("\nWithin reach in a minority of the experiments of a cell, which chance has favoured:\n")
    print("| answer | cells | covered | share of the intervals |", "| --- | --- | --- | --- |", sep="\n")
    for answer in dict.fromkeys(row["answer"] for row in rows):
        here = [row for row in rows if row["answer"] == answer and seldom_within_reach(row)]
        covered, total, answered = (
            sum(int(row[name]) for row in here) for name in ("covered_supported", "supported", "answered")
        )
        if here:
            print(f"| {answer} | {len(here)} | {share(covered, total)} | {100 * total / answered:.0f} % |")
    print("\nGiven without a warning, judged by each experiment's own estimates:\n")
    print(*unwarned(rows), sep="\n")
    print()
    for answer in dict.fromkeys(row["answer"] for row in rows):
        covered, total = pooled(row for row in rows if row["answer"] == answer and promised(row))
        if total and not POOLED_BETWEEN[0] <= 100 * covered / total <= POOLED_BETWEEN[1]:
            print(f"pooled outside 94-96: {answer}, {share(covered, total)}")
    worst = [row for row in rows if promised(row) and excluded(*counts(row))]
    print(f"cells whose 99.9 % bound excludes {LOWEST_CELL}: {len(worst)}")
    for row in worst:
        print(
            "  ",
            *list(row.values())[:4],
            row["answer"],
            share(*counts(row)),
            f"of {counts(row)[1]}",
            sep="  ",
        )
    draw(rows, picture)


def draw(rows: list[Row], picture: Path) -> None:
    """Coverage of every cell against the length of its runs, one frame an answer."""
    answers = list(dict.fromkeys(row["answer"] for row in rows))
    figure = Figure(figsize=(10, 6.5), layout="constrained")
    frames = figure.subplots(2, 3, sharex=True, sharey=True)
    for frame, answer in zip(frames.flat, answers, strict=True):
        frame.axhspan(*POOLED_BETWEEN, color="0.9", zorder=0)
        frame.axhline(NOMINAL, color="0.6", linewidth=0.8, zorder=1)
        here = [row for row in rows if row["answer"] == answer]
        for row in here:
            covered, total = counts(row)
            if total < 100:  # too few to say anything
                continue
            interval = binomtest(covered, total).proportion_ci(method="exact")
            percent = 100 * covered / total
            # side by side, else they hide one another: by coefficient, then system, then sharing
            place = list(MARKERS).index(row["coefficient"]) - 1.0
            place += 0.4 * (row["system"] == "two phases") - 0.2 + 0.13 * SIDE[row["shared_wanted"]]
            across = int(row["independent_samples_a_run"]) * APART**place
            frame.errorbar(
                across,
                percent,
                yerr=[[percent - 100 * interval.low], [100 * interval.high - percent]],
                marker=MARKERS[row["coefficient"]],
                markersize=5 if row["system"] == "one phase" else 3.5,
                color="black" if promised(row) else "0.45",
                markerfacecolor="black" if promised(row) else "white",
                elinewidth=0.7,
                markeredgewidth=0.8,
                zorder=3 if promised(row) else 2,
            )
        frame.set_title(answer, fontsize=10)
        frame.set_xscale("log")
        frame.set_xlim(30 / APART**2, 1000 * APART**2)
        frame.set_xticks([30, 100, 300, 1000], ["30", "100", "300", "1000"])
        frame.minorticks_off()
    for frame in frames[-1]:
        frame.set_xlabel("independent samples a run")
    for frame in frames[:, 0]:
        frame.set_ylabel("95 % intervals that hold the truth (%)")
    figure.suptitle(
        "Filled: weakest cut 10 or more, at least 100 independent samples, intervals within reach.  Open: outside.\n"
        "Correlation: circle 0, square 0.9, triangle 0.99.  Large: one phase, small: two phases.  Bars: 95 % binomial.",
        fontsize=9,
    )
    figure.savefig(picture, dpi=110, metadata={"Software": None})
