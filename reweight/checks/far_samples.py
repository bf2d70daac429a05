"""Far samples: fill values and damaged numbers that are finite, and so cannot be told from energies while reading."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.checks.finding import Finding, Verdict
from reweight.density_of_states import DensityOfStates

__all__ = ["far_samples"]

FARTHEST = 20.0  # interquartile ranges from the median
REASON = (
    "27 standard deviations of a normal distribution; even of a single quadratic degree of freedom fewer than one sample in "
    "a million lies so far out (chi-squared distribution)"
)


def far_samples(combined: DensityOfStates) -> list[Finding]:
    """One finding a run, cold to hot: how many of the rows in use lie far from all the others."""
    return [_finding(combined, int(place)) for place in combined.cold_to_hot]


def _finding(combined: DensityOfStates, place: int) -> Finding:
    assembly, leaves = combined.estimate.assembly, combined.estimate.runs[place]
    rows = leaves.total[0].reshape(-1, assembly.order).sum(axis=1) * leaves.weighting
    energies = assembly.energies[leaves.index].reshape(-1, assembly.order).mean(axis=1) + assembly.reference
    distance = _distance(rows, energies)
    count = round(float(rows[distance > FARTHEST].sum()))
    name = combined.runs[place].name
    farthest = float(energies[np.argmax(distance)])
    return Finding(
        check="far samples",
        offender=name,
        found=float(distance.max()),
        limit=FARTHEST,
        limit_reason=REASON,
        verdict=Verdict.CAUTION if count else Verdict.SOUND,
        summary=(
            f"{name} has {count:,} {'sample' if count == 1 else 'samples'} more than {FARTHEST:g} interquartile ranges from "
            f"its median energy, the farthest near {farthest:.6g}"
        ),
        advice=(
            "delete rows that hold fill values or damaged numbers; a phase that is hardly visited needs a longer run"
            if count
            else ""
        ),
    )


def _distance(rows: NDArray[np.float64], energies: NDArray[np.float64]) -> NDArray[np.float64]:
    """Distance from the median in interquartile ranges, by panel or level; 0 if half of the rows share one of them."""
    shares = np.cumsum(rows) / rows.sum()
    low, median, high = energies[np.searchsorted(shares, [0.25, 0.5, 0.75])]
    if high == low:
        return np.zeros_like(energies)
    return np.asarray(np.abs(energies - median) / (high - low))
