"""Doubled start: whether the answers stay when twice as much is left out at the start of every run."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from reweight.answers.evaluate import Evaluation, evaluate, values
from reweight.checks.finding import Finding, Verdict
from reweight.combining import weighted
from reweight.deciding import FEWEST_LEAVES
from reweight.density_of_states import DensityOfStates, RunRecord
from reweight.estimate import Estimate
from reweight.multistate import Solution, solve

__all__ = ["doubled_start"]

Array = NDArray[np.float64]

ASKED = ("energy", "heat_capacity")
LARGEST_SHIFT = 1.0  # standard errors
CHANCE = 3.0  # standard deviations that leaving out so much may move an answer by itself
REASON = (
    "more than one standard error, and more than three times what chance moves an answer when so much is left out, "
    "means that the start is not forgotten yet"
)


def doubled_start(combined: DensityOfStates) -> list[Finding]:
    """One finding, on the answer that moves most; none if nothing was left out or nothing can be answered.

    Mean energy and heat capacity at the simulated temperatures are compared with those of the same runs with every
    start doubled.
    """
    doubled = tuple(_doubled(run) for run in combined.runs)
    lost = np.array(
        [1 - later.samples / run.samples for run, later in zip(combined.runs, doubled, strict=True)]
    )
    if not lost.any() or (combined.sharing < 1).any():
        return []
    later = dataclasses.replace(combined, runs=doubled, estimate=_solved_again(combined, doubled))
    beta = np.unique(combined.estimate.beta)
    worst: tuple[float, float, str] | None = None
    for found in evaluate(combined, combined.quantities(ASKED), beta):
        shift = values(later, found.quantity, beta) - found.value
        inside = found.within_reach & (found.variance.total > 0)
        if not inside.any():
            continue
        scaled = np.abs(shift[inside]) / found.variance.standard_error[inside]
        excess = scaled / np.maximum(LARGEST_SHIFT, CHANCE * _chance(found, lost)[inside])
        place = int(excess.argmax())
        if worst is None or excess[place] > worst[0]:
            temperature = float(combined.description.temperature(beta[inside][place]))
            where = f"{found.quantity.long_name} at {temperature:.6g} {combined.description.temperature_label}".rstrip()
            worst = float(excess[place]), float(scaled[place]), where
    return [] if worst is None else [_finding(*worst)]


def _doubled(run: RunRecord) -> RunRecord:
    first = run.decision.first_leaf
    later = max(first, min(2 * first, run.leaf_rows.size - FEWEST_LEAVES))
    return dataclasses.replace(run, decision=dataclasses.replace(run.decision, first_leaf=later))


def _solved_again(combined: DensityOfStates, runs: tuple[RunRecord, ...]) -> Estimate:
    start = combined.estimate.solution.free_energies

    def solver(per_run: Array, counts: Array, beta: Array, energies: Array) -> Solution:
        return solve(per_run.sum(axis=0), counts, beta, energies, start)

    return weighted(combined.description, runs, combined.estimate.assembly, solver)


def _chance(found: Evaluation, lost: Array) -> Array:
    """Standard deviation of the shift over the answer's standard error, if the runs were stationary.

    Leaving out a share d of a run raises its part v of the variance to v / (1 - d), and the shift has the variance of
    the difference.
    """
    added = (found.variance.shares * (lost / (1 - lost))[:, None]).sum(axis=0)
    return np.asarray(np.sqrt(np.maximum(added, 0)))


def _finding(excess: float, shift: float, where: str) -> Finding:
    sound = excess <= 1
    return Finding(
        check="doubled start",
        offender=where,
        found=shift,
        limit=shift / excess if excess > 0 else LARGEST_SHIFT,
        limit_reason=REASON,
        verdict=Verdict.SOUND if sound else Verdict.CAUTION,
        summary=f"leaving out twice as much at the start of the runs moves the {where} by {shift:.1f} standard errors",
        advice="" if sound else "raise discard, or run longer",
    )
