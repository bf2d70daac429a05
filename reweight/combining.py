"""From runs to the combined object: look at the first rows, tally in one pass, decide, solve.

A sample's way: a source yields chunks of rows (energy, observables); a :class:`~reweight.tally.run_tally.RunTally` turns
them into leaves; transient and inefficiency are decided from the thinned series; the leaves kept are weighted and the
free energies solved for.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from itertools import chain
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.deciding import FEWEST_ROWS, decide
from reweight.density_of_states import DensityOfStates, Description, LeftOut, RunRecord
from reweight.errors import DisconnectedError, InputError, TooShortError
from reweight.estimate import Estimate
from reweight.memory import keep_freed_memory
from reweight.multistate import Solution, cut_sharing, pairwise_start, solution_at, solve
from reweight.runs import Source
from reweight.tally.assemble import Assembly
from reweight.tally.levels import are_levels, find_spacing
from reweight.tally.nodes import Nodes
from reweight.tally.panels import panel_width
from reweight.tally.run_tally import RunTally

__all__ = ["Progress", "combine_sources", "estimate_of", "tally_sources", "weighted"]

Array = NDArray[np.float64]

FIRST_ROWS = 4096
LARGEST_ENERGY = 1e60  # the reach asks for eighth powers, which must stay finite
WORKERS = (
    1  # more do not help: sums hold the interpreter's lock, and files are read ahead and hashed beside it
)

# Called with a run's name and the number of rows just tallied; 0 once the run is complete.
Progress = Callable[[str, int], None]


def combine_sources(
    sources: Sequence[Source],
    description: Description,
    *,
    left_out: Sequence[LeftOut] = (),
    study_text: str = "",
    provenance: dict[str, str] | None = None,
    connected: bool = True,
    workers: int = WORKERS,
    progress: Progress | None = None,
) -> DensityOfStates:
    """Tally all sources and combine them.

    Parameters
    ----------
    connected : bool
        Refuse runs that share no energies; otherwise such runs are joined by pairwise estimates that mean nothing
        across the gap, for looking at the runs themselves.

    Raises
    ------
    InputError, DisconnectedError, ConvergenceError
    """
    tallies = tally_sources(sources, description, workers=workers, progress=progress)
    clocks = [source.clock() for source in sources]
    decided = decide(
        tallies,
        [source.discard for source in sources],
        [source.name for source in sources],
        clocks=clocks,
        exchange=description.exchange,
    )
    records = [
        RunRecord(
            name=source.name,
            beta=source.beta,
            tally=tally,
            decision=decision,
            leaf_rows=rows,
            thinned=thinned,
            files=_accounted(source.files(), int(rows[: decision.first_leaf].sum())),
            clock=clock,
        )
        for source, tally, clock, (decision, rows, thinned) in zip(
            sources, tallies, clocks, decided.runs, strict=True
        )
    ]
    return DensityOfStates(
        description=description,
        runs=tuple(records),
        estimate=estimate_of(description, records, decided.assembly, connected=connected),
        left_out=tuple(left_out),
        study_text=study_text,
        provenance=provenance or {},
    )


def _accounted(files: tuple[dict[str, Any], ...], transient: int) -> tuple[dict[str, Any], ...]:
    """Ledger entries with the transient taken from the first rows kept."""
    entries = []
    for entry in files:
        here = min(transient, entry["kept"])
        transient -= here
        entries.append({**entry, "kept": entry["kept"] - here, "transient": here})
    return tuple(entries)


def tally_sources(
    sources: Sequence[Source],
    description: Description,
    *,
    workers: int = WORKERS,
    progress: Progress | None = None,
) -> list[RunTally]:
    """Read every source once, into tallies on nodes that suit all of them.

    Raises
    ------
    InputError
        No runs, or a run with too few rows.
    """
    if not sources:
        raise InputError("a study must have at least one run in use; got none.")
    keep_freed_memory()
    streams = [source.chunks() for source in sources]
    openings = [_opening(stream) for stream in streams]
    nodes = _nodes([opening[:, 0] for opening in openings], np.array([s.beta for s in sources]), description)
    observables = [each.name for each in description.observables]

    def read(source: Source, opening: Array, stream: Iterator[Array]) -> RunTally:
        tally = RunTally(nodes, description.columns, observables)
        for rows in chain([opening], stream):
            tally.add(rows)
            if progress is not None:
                progress(source.name, rows.shape[0])
        if progress is not None:
            progress(source.name, 0)
        if tally.row_count < FEWEST_ROWS:
            raise TooShortError(
                f"a run must have at least {FEWEST_ROWS} samples; got {tally.row_count} (run {source.name!r}). "
                "Sample longer, or leave the run out with use = false.",
                run=source.name,
            )
        return tally

    if workers == 1:
        return list(map(read, sources, openings, streams))
    with ThreadPoolExecutor(max_workers=workers) as pool:
        return list(pool.map(read, sources, openings, streams))


def _opening(stream: Iterator[Array]) -> Array:
    """First rows of a run: as many chunks as it takes to see enough of them."""
    chunks: list[Array] = []
    seen = 0
    for rows in stream:
        chunks.append(rows)
        seen += rows.shape[0]
        if seen >= FIRST_ROWS:
            break
    if not chunks:
        return np.empty((0, 1))
    return chunks[0] if len(chunks) == 1 else np.concatenate(chunks)


def _nodes(openings: Sequence[Array], beta: Array, description: Description) -> Nodes:
    first = [energies[:FIRST_ROWS] for energies in openings]
    pooled = np.concatenate(first)
    largest = float(np.abs(pooled).max(initial=0.0))
    if largest > LARGEST_ENERGY:
        raise InputError(
            f"energies must be smaller than {LARGEST_ENERGY:g}; got {largest:g}. Check the unit."
        )
    spacing = find_spacing(pooled)
    if spacing is not None:
        first = [spacing.snap(energies) for energies in first]
        pooled = np.concatenate(first)
    deviations = [float(np.std(energies)) for energies in first if energies.size > 1]
    gaps = np.diff(np.sort(beta))
    width = panel_width(
        min((each for each in deviations if each > 0), default=0.0),
        float(gaps.max()) if gaps.size else 0.0,
        description.resolution,
    )
    return Nodes(width, discrete=are_levels(np.unique(pooled).size, pooled.size), spacing=spacing)


def estimate_of(
    description: Description, runs: Sequence[RunRecord], assembly: Assembly, *, connected: bool = True
) -> Estimate:
    """Weight and solve; refuse runs that share nothing, unless they need not be connected.

    Raises
    ------
    DisconnectedError
        A cut between neighbouring temperatures is crossed by less than one independent sample's worth of energies.
    """
    shares = np.array(
        [
            1.0 if description.weighting == "independent" else 1 / inefficiency
            for inefficiency in (run.decision.weight_inefficiency for run in runs)
        ]
    )

    def solver(per_run: Array, counts: Array, beta: Array, energies: Array) -> Solution:
        start = pairwise_start(per_run, counts, beta, energies)
        joined = solution_at(start, counts, beta, energies, iterations=0, residual=np.inf)
        sharing = cut_sharing(shares @ per_run, joined.probabilities, beta)
        if (sharing < 1).any() and not connected:
            return joined
        if (sharing < 1).any():
            means = per_run @ energies / counts
            raise _disconnected(description, [run.name for run in runs], beta, means, sharing)
        return solve(per_run.sum(axis=0), counts, beta, energies, start)

    return weighted(description, runs, assembly, solver)


def weighted(
    description: Description,
    runs: Sequence[RunRecord],
    assembly: Assembly,
    solver: Callable[[Array, Array, Array, Array], Solution],
) -> Estimate:
    """Weight the runs' leaves as decided, and solve as told."""
    inefficiencies = np.array([run.decision.weight_inefficiency for run in runs])
    return Estimate.solved(
        assembly,
        description.columns,
        np.array([run.beta for run in runs]),
        [run.decision.first_leaf for run in runs],
        inefficiencies,
        inefficiencies if description.weighting == "independent" else np.ones(len(runs)),
        solver,
    )


def _disconnected(
    description: Description, names: Sequence[str], beta: Array, means: Array, sharing: Array
) -> DisconnectedError:
    order = np.argsort(beta, kind="stable")[::-1]  # cold to hot
    groups: list[list[str]] = [[names[order[0]]]]
    bridges: list[float] = []
    gaps = []
    for place, shared in enumerate(sharing[::-1]):
        cold, hot = order[place], order[place + 1]
        if shared >= 1:
            groups[-1].append(names[hot])
            continue
        groups.append([names[hot]])
        # Thermodynamic length across the gap, bounded by the Cauchy-Schwarz inequality; steps of 1.5 overlap well.
        length = float(np.sqrt((beta[cold] - beta[hot]) * abs(means[hot] - means[cold])))
        number = max(1, int(np.ceil(length / 1.5)) - 1)
        bridges += list(np.linspace(beta[cold], beta[hot], number + 2)[1:-1])
        gaps.append(f"{names[cold]!r} and {names[hot]!r}")
    unit = f" {description.temperature_label}".rstrip()
    at = description.temperature(np.array(bridges))
    shown = ", ".join(f"{t:.4g}" for t in at[:8]) + (f" ... ({at.size} in all)" if at.size > 8 else "")
    return DisconnectedError(
        f"all runs must share energies with their neighbours; got {len(groups)} groups that do not: "
        + "; ".join(f"[{', '.join(group)}]" for group in groups)
        + f". Between {' and between '.join(gaps)} fewer than one independent sample is shared, so nothing fixes their "
        f"relative weight. Add runs near {shown}{unit}, or combine the groups separately.",
        groups=groups,
        bridges=at,
    )
