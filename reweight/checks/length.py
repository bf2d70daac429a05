"""Length: whether every run holds enough independent samples, by the slower of two estimates of its correlation."""

from __future__ import annotations

from reweight.checks.finding import Finding, Verdict
from reweight.density_of_states import DensityOfStates, RunRecord

__all__ = ["length"]

FEWEST_INDEPENDENT = 30.0
PROMISED_INDEPENDENT = 100.0
REASON = (
    "95 % intervals covered 94-96 % from 100 independent samples a run on, and still 93.7-95.7 % at 30; "
    "below that nothing was measured"
)


def length(combined: DensityOfStates) -> list[Finding]:
    """One finding a run, cold to hot."""
    return [_finding(combined.runs[i]) for i in combined.cold_to_hot]


def _finding(run: RunRecord) -> Finding:
    independent = run.independent_samples
    if independent < FEWEST_INDEPENDENT:
        verdict, limit = Verdict.UNSOUND, FEWEST_INDEPENDENT
    elif independent < PROMISED_INDEPENDENT:
        verdict, limit = Verdict.CAUTION, PROMISED_INDEPENDENT
    else:
        verdict, limit = Verdict.SOUND, PROMISED_INDEPENDENT
    factor = limit / independent
    summary = f"{run.name} holds {independent:.0f} independent samples"
    advice = "" if verdict is Verdict.SOUND else f"run it {factor:.1f} times as long"
    if run.inefficiency.constant:
        summary = f"{run.name} never changes its energy"
        advice = "check that it was sampled at all; a frozen run tells only its ground level"
    return Finding(
        check="length",
        offender=run.name,
        found=independent,
        limit=limit,
        limit_reason=REASON,
        verdict=verdict,
        summary=summary,
        advice=advice,
    )
