"""From runs to the combined object: look at the first rows, tally in one pass, decide, solve.

A sample's way: a source yields chunks of rows (energy, observables); a :class:`~reweight.tally.run_tally.RunTally` turns
them into leaves; transient and inefficiency are decided from the thinned series; the leaves kept are weighted and the
free energies solved for.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import chain

import numpy as np
from numpy.typing import NDArray

from reweight.continuing import KnownRun
from reweight.deciding import FEWEST_ROWS, decide
from reweight.density_of_states import DensityOfStates, Description, LeftOut, RunRecord
from reweight.errors import DisconnectedError, InputError, TooShortError
from reweight.estimate import Estimate
from reweight.memory import keep_freed_memory
from reweight.multistate import Solution, cut_sharing, pairwise_start, solution_at, solve
from reweight.reading import UnknownError
from reweight.runs import Source
from reweight.tally.assemble import Assembly
from reweight.tally.nodes import FIRST_ROWS, Nodes, suitable_nodes
from reweight.tally.run_tally import RunTally
from reweight.units import REDUCED

__all__ = ["Progress", "combine_sources", "estimate_of", "tally_sources", "weighted"]

Array = NDArray[np.float64]

NO_ENERGIES: Array = np.empty(0)
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
    known: Mapping[str, KnownRun] | None = None,
    tell: Callable[[str], None] = lambda _: None,
) -> DensityOfStates:
    """Tally all sources and combine them.

    Parameters
    ----------
    connected : bool
        Refuse runs that share no energies; otherwise such runs are joined by pairwise estimates that mean nothing
        across the gap, for looking at the runs themselves.
    known : mapping of str to KnownRun, optional
        By run name, what an earlier combined file holds; of these runs only the rest is read.
    tell : callable, optional
        Called with the reason in words if known runs are read again all the same.

    Raises
    ------
    InputError, DisconnectedError, ConvergenceError
    """
    read = _tallied(sources, description, known or {}, workers=workers, progress=progress, tell=tell)
    sources = [source for source, _, _ in read]
    tallies = [tally for _, _, tally in read]
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
            files=source.files(int(rows[: decision.first_leaf].sum())),
            clock=clock,
            first_energies=first_energies,
        )
        for (source, first_energies, tally), clock, (decision, rows, thinned) in zip(
            read, clocks, decided.runs, strict=True
        )
    ]
    return DensityOfStates(
        description=description,
        runs=tuple(records),
        estimate=estimate_of(description, records, decided.assembly, connected=connected),
        left_out=tuple(left_out),
        replicas=sources[0].replicas,
        study_text=study_text,
        provenance=provenance or {},
    )


def tally_sources(sources: Sequence[Source], description: Description) -> list[RunTally]:
    """Read every source once, into tallies on nodes that suit all of them.

    Raises
    ------
    InputError
        No runs, or a run with too few rows.
    """
    read = _tallied(sources, description, {}, workers=WORKERS, progress=None, tell=lambda _: None)
    return [tally for _, _, tally in read]


@dataclass(slots=True)
class _Begun:
    """A run of which the first rows were seen.

    ``tally`` holds the rows of an earlier combined file, None without one; ``waiting`` are rows read and not yet tallied.
    """

    source: Source
    first_energies: Array
    waiting: list[Array]
    stream: Iterator[Array]
    tally: RunTally | None = None


def _tallied(
    sources: Sequence[Source],
    description: Description,
    known: Mapping[str, KnownRun],
    *,
    workers: int,
    progress: Progress | None,
    tell: Callable[[str], None],
) -> list[tuple[Source, Array, RunTally]]:
    """Read every source once, into tallies on nodes that suit all of them; of known runs, only what is new.

    Raises
    ------
    InputError
        No runs, or a run with too few rows.
    """
    if not sources:
        raise InputError("a study must have at least one run in use; got none.")
    keep_freed_memory()
    begun = [_begun(source, known.get(source.name), tell) for source in sources]
    nodes = suitable_nodes(
        [each.first_energies for each in begun],
        np.array([source.beta for source in sources]),
        description.resolution,
    )
    unfit = next((each for each in known.values() if not each.nodes.collects_like(nodes)), None)
    if unfit is not None:
        tell(f"{_why_unfit(unfit.nodes, nodes, description)}: every file is read again from its start")
        begun = [_from_start(source) for source in sources]

    def read(run: _Begun, whole: Source) -> tuple[Source, Array, RunTally]:
        source = run.source
        columns, observables = description.columns, [each.name for each in description.observables]
        tally = RunTally(nodes, columns, observables) if run.tally is None else run.tally.copied(nodes)
        try:
            for rows in chain(run.waiting, run.stream):
                tally.add(rows)
                if progress is not None:
                    progress(source.name, rows.shape[0])
        except UnknownError as error:
            tell(_read_again(whole, error))
            return read(_from_start(whole), whole)
        if progress is not None:
            progress(source.name, 0)
        if tally.row_count < FEWEST_ROWS:
            raise TooShortError(
                f"a run must have at least {FEWEST_ROWS} samples; got {tally.row_count} (run {source.name!r}). "
                "Sample longer, or leave the run out with use = false.",
                run=source.name,
            )
        return source, run.first_energies, tally

    if workers == 1:
        return list(map(read, begun, sources))
    with ThreadPoolExecutor(max_workers=workers) as pool:
        return list(pool.map(read, begun, sources))


def _begun(source: Source, known: KnownRun | None, tell: Callable[[str], None]) -> _Begun:
    """Begin a run after the rows that are known."""
    if known is None:
        return _from_start(source)
    try:
        return _from_start(known.rest, known.first_energies, known.tally)
    except UnknownError as error:
        tell(_read_again(source, error))
        return _from_start(source)


def _read_again(source: Source, reason: UnknownError) -> str:
    return f"run {source.name!r} is read again from its start: {reason}"


def _from_start(source: Source, first: Array = NO_ENERGIES, tally: RunTally | None = None) -> _Begun:
    """Read the first rows of a source: as many chunks as it takes to have seen enough of them."""
    stream = source.chunks()
    waiting: list[Array] = []
    while first.size < FIRST_ROWS and (rows := next(stream, None)) is not None:
        waiting.append(rows)
        first = np.concatenate([first, rows[:, 0]])
    return _Begun(source, first[:FIRST_ROWS].copy(), waiting, stream, tally)


def _why_unfit(before: Nodes, now: Nodes, description: Description) -> str:
    if before.width != now.width:
        unit = "" if description.energy_unit == REDUCED else f" {description.energy_unit}"
        return (
            f"energies must be kept on intervals of {now.width:g}{unit} now, not {before.width:g}{unit} (a run is "
            "narrower than all before, temperatures lie further apart, or the resolution was changed)"
        )
    return "the first energies of all runs are rounded in another way now"


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
