"""Tally and solve, in units of one ``numpy.sum`` over the same numbers: ``python speed_and_memory.py [REPETITIONS]``.

Energies only, panels, with leaves (so that error bars follow without the samples); one worker, as ``combine`` uses for
runs in memory, and two beside it.
Extra memory is the rise of the largest resident size of a fresh process above what it holds with the samples in memory.
"""

from __future__ import annotations

import multiprocessing
import sys
from concurrent.futures import ThreadPoolExecutor
from multiprocessing.connection import Connection
from pathlib import Path

import numpy as np
from gamma_study import energies, leaves_of, nodes_for, solved
from numpy.typing import NDArray
from side_by_side import medians, milliseconds, say_rows, say_target, table_rows

from reweight.estimate import Estimate
from reweight.tally.nodes import Nodes

RUNS, ROWS = 32, 1_000_000
WORKERS = 1
TARGET_SUMS = 80.0
TARGET_MEGABYTES = 300.0
GROWTH = [
    (16, 6_250),
    (16, 62_500),
    (16, 625_000),
    (16, 1_875_000),
    (4, 250_000),
    (16, 250_000),
    (64, 250_000),
]


def tally_and_solve(samples: NDArray[np.float64], nodes: Nodes, workers: int = WORKERS) -> Estimate:
    """All runs, shape (K, N), to free energies."""
    if workers == 1:
        return solved([leaves_of(run, nodes) for run in samples])
    with ThreadPoolExecutor(workers) as pool:
        return solved(list(pool.map(lambda run: leaves_of(run, nodes), samples)))


def largest_resident_megabytes() -> float:
    """Peak of this process so far (Linux)."""
    (line,) = (
        line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith("VmHWM")
    )
    return int(line.split()[1]) / 1024


def report_extra_memory(connection: Connection, run_count: int, rows: int) -> None:
    """In a fresh process: how far the peak rises during tally and solve."""
    samples = energies(run_count, rows)
    nodes = nodes_for(samples[:, :4096])
    tally_and_solve(samples[:2, :4096], nodes)  # whatever libraries set aside once
    before = largest_resident_megabytes()
    tally_and_solve(samples, nodes)
    connection.send(largest_resident_megabytes() - before)


def extra_megabytes(run_count: int, rows: int) -> float:
    """Measure in a fresh process."""
    receiving, sending = multiprocessing.Pipe(duplex=False)
    process = multiprocessing.get_context("spawn").Process(
        target=report_extra_memory, args=(sending, run_count, rows)
    )
    process.start()
    sending.close()  # else a process that died would be waited for without end
    extra = float(receiving.recv())
    process.join()
    return extra


def main(repetitions: int) -> None:
    """Time, measure memory, show growth."""
    samples = energies(RUNS, ROWS)
    nodes = nodes_for(samples)
    taken = medians(
        {
            "one numpy.sum": samples.sum,
            "tally and solve": lambda: tally_and_solve(samples, nodes),
            "tally and solve, two workers": lambda: tally_and_solve(samples, nodes, 2),
        },
        repetitions,
    )
    del samples
    unit = taken["one numpy.sum"]
    say_rows(f"{RUNS} runs x {ROWS:,} energies", table_rows(taken, unit, "sums"))
    say_target(
        "tally and solve, in sums",
        taken["tally and solve"].wall / unit.wall,
        TARGET_SUMS,
        at_most=True,
    )
    memory = extra_megabytes(RUNS, ROWS)
    say_target("extra memory in MB (resident, peak)", memory, TARGET_MEGABYTES, at_most=True)

    table = [("runs", "energies in all", "tally and solve", "nanoseconds an energy", "sums", "extra MB")]
    for run_count, row_count in GROWTH:
        samples = energies(run_count, row_count)
        nodes = nodes_for(samples)
        jobs = {"sum": samples.sum, "ours": lambda s=samples, n=nodes: tally_and_solve(s, n)}
        growth = medians(jobs, repetitions)
        table.append(
            (
                str(run_count),
                f"{samples.size:,}",
                milliseconds(growth["ours"].wall),
                f"{1e9 * growth['ours'].wall / samples.size:.3g}",
                f"{growth['ours'].wall / growth['sum'].wall:.3g}",
                f"{extra_megabytes(run_count, row_count):.3g}",
            )
        )
    say_rows("Growth with the number of energies, then with the number of runs", table)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 5)
