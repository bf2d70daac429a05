"""What is decided about each run after it was tallied: where it starts, how correlated it is, what its samples weigh.

Nothing is read again to change a decision: all of it comes from the thinned series and the lengths of the leaves.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.clock import Clock
from reweight.density_of_states import Decision
from reweight.errors import InputError, TooShortError
from reweight.series.correlation import Inefficiency, shrink, statistical_inefficiency
from reweight.series.transient import transient_length
from reweight.study.values import amount_and_unit
from reweight.tally.assemble import Assembly, assemble
from reweight.tally.leaves import LeafSums, ScatteredSums
from reweight.tally.run_tally import RunTally
from reweight.tally.thinned import Thinned

__all__ = ["FEWEST_LEAVES", "FEWEST_ROWS", "Decided", "decide", "first_leaf_after"]

Array = NDArray[np.float64]

FEWEST_ROWS = 10
FEWEST_LEAVES = 5  # after the transient; from fewer blocks no error can be told


@dataclass(frozen=True)
class Decided:
    """Runs with their decisions, and their leaves on common nodes."""

    runs: list[tuple[Decision, NDArray[np.int64], Thinned]]
    assembly: Assembly


def decide(
    tallies: Sequence[RunTally],
    discards: Sequence[int | str],
    names: Sequence[str],
    *,
    clocks: Sequence[Clock | None] | None = None,
    exchange: bool = False,
) -> Decided:
    """Transient and inefficiency of every run, from what the tallies kept.

    Parameters
    ----------
    discards : sequence of int or str
        ``"auto"``, rows, a percentage or a time.
    clocks : sequence of Clock or None, optional
        Time between the rows of each run.
    exchange : bool
        The runs are one replica exchange: equally long, with one common start, the latest.

    Raises
    ------
    InputError
        A time was asked for without a clock, or runs of a replica exchange do not go together.
    TooShortError
        Too little is left of a run.
    """
    clocks = [None] * len(tallies) if clocks is None else clocks
    if exchange:
        _refuse_unequal(tallies, clocks, names)
    completed = [_completed(tally, name) for tally, name in zip(tallies, names, strict=True)]
    transients = [
        _transient(thinned, tally.row_count, discard, clock, name)
        for tally, (_, thinned), discard, clock, name in zip(
            tallies, completed, discards, clocks, names, strict=True
        )
    ]
    starts = [
        first_leaf_after(leaves.rows, max(transients) if exchange else own)
        for (leaves, _), own in zip(completed, transients, strict=True)
    ]
    for (leaves, _), start, discard, name in zip(completed, starts, discards, names, strict=True):
        _refuse_short(leaves.rows, start, discard, name)
    raw = []
    for (leaves, thinned), start in zip(completed, starts, strict=True):
        first = int(leaves.rows[:start].sum()) // thinned.group
        raw.append(
            statistical_inefficiency(
                thinned.means()[first:, 0],
                group=thinned.group,
                within_variance=float(thinned.within_variance()[first:, 0].mean()),
            )
        )
    kept = np.array(
        [leaves.rows[start:].sum() for (leaves, _), start in zip(completed, starts, strict=True)], float
    )
    weights = _shrunk(raw, kept, [thinned.group for _, thinned in completed])
    decisions = [
        Decision(
            discard=discard,
            transient=transient,
            first_leaf=start,
            common_start=exchange,
            inefficiency=inefficiency,
            weight_inefficiency=float(weight),
        )
        for discard, transient, start, inefficiency, weight in zip(
            discards, transients, starts, raw, weights, strict=True
        )
    ]
    return Decided(
        runs=[(d, leaves.rows, thinned) for d, (leaves, thinned) in zip(decisions, completed, strict=True)],
        assembly=assemble(tallies, [leaves for leaves, _ in completed]),
    )


def first_leaf_after(leaf_rows: NDArray[np.int64], transient: int) -> int:
    """First leaf without a row of the transient."""
    return int(np.searchsorted(np.concatenate([[0], np.cumsum(leaf_rows)]), transient))


def _completed(tally: RunTally, name: str) -> tuple[LeafSums | ScatteredSums, Thinned]:
    try:
        return tally.complete()
    except InputError as error:
        raise InputError(f"run {name!r}: {error}") from error


def _transient(thinned: Thinned, rows: int, discard: int | str, clock: Clock | None, name: str) -> int:
    if isinstance(discard, int):
        return discard
    if discard == "auto":
        return transient_length(thinned.means()[:, 0]) * thinned.group
    amount, unit = amount_and_unit(discard)
    if unit == "%":
        return int(np.ceil(rows * amount / 100))
    if clock is None:
        raise InputError(
            f"discard as a time must go with a clock; got {discard!r}, but no time between samples (run {name!r}). "
            'Pass time_step=0.5, time_unit="ps", or give rows or a percentage.'
        )
    return clock.rows(amount, unit)


def _refuse_short(leaf_rows: NDArray[np.int64], start: int, discard: int | str, name: str) -> None:
    if leaf_rows.size - start < FEWEST_LEAVES or int(leaf_rows[start:].sum()) < FEWEST_ROWS:
        raise TooShortError(
            f"discard must leave at least {FEWEST_ROWS} rows in {FEWEST_LEAVES} of the {leaf_rows.size} blocks of a run; "
            f"got {discard!r} of {int(leaf_rows.sum())} rows (run {name!r}). Discard fewer rows, or leave the run out "
            "with use = false.",
            run=name,
        )


def _refuse_unequal(
    tallies: Sequence[RunTally], clocks: Sequence[Clock | None], names: Sequence[str]
) -> None:
    counts = np.array([tally.row_count for tally in tallies])
    if np.ptp(counts):
        few, many = int(counts.argmin()), int(counts.argmax())
        raise InputError(
            f"runs of a replica exchange must have the same number of rows; got {counts[few]} (run {names[few]!r}) to "
            f"{counts[many]} (run {names[many]!r}). Rows of equal number must be of equal time: cut the files to what "
            "all have; if the runs did not exchange, say exchange = false."
        )
    known = [(clock, name) for clock, name in zip(clocks, names, strict=True) if clock is not None]
    for clock, name in known[1:]:
        first, first_name = known[0]
        if abs(clock.step - first.step) * counts[0] > first.step:
            raise InputError(
                f"runs of a replica exchange must be recorded at equal times; got a row every {first.step:g} {first.unit} "
                f"(run {first_name!r}) and every {clock.step:g} {clock.unit} (run {name!r}). Thin the files to one step."
            )


def _shrunk(raw: Sequence[Inefficiency], kept: Array, groups: Sequence[int]) -> Array:
    """Inefficiencies for the weights; constant runs count as one sample and stay out of the common value."""
    values = np.array([each.value for each in raw])
    varying = np.array([not each.constant for each in raw])
    if varying.any():
        windows = np.array([each.window * group for each, group in zip(raw, groups, strict=True)])
        values[varying] = shrink(values[varying], windows[varying], kept[varying])
    return values
