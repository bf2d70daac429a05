"""Transient: whether what was left out at the start of a run is enough, and how much of the run it is."""

from __future__ import annotations

from reweight.checks.finding import Finding, Verdict
from reweight.density_of_states import DensityOfStates, RunRecord
from reweight.series.transient import least_error_start, start_difference

__all__ = ["transient_length", "transient_rules"]

LARGEST_SHARE = 0.5
SHARE_REASON = "a run of which more than half is transient has hardly begun to be stationary (common practice, no source)"

LARGEST_DIFFERENCE = 2.0
DIFFERENCE_REASON = (
    "stationary runs of 100 and more independent samples differed by more in fewer than 1 of 200 simulated cases, "
    "runs of 30 in 1 of 75"
)


def transient_length(combined: DensityOfStates) -> list[Finding]:
    """One finding a run, cold to hot: the share of the run that is left out."""
    return [_share(combined.runs[i]) for i in combined.cold_to_hot]


def _share(run: RunRecord) -> Finding:
    share = run.transient_rows / run.rows
    sound = share <= LARGEST_SHARE
    return Finding(
        check="transient length",
        offender=run.name,
        found=share,
        limit=LARGEST_SHARE,
        limit_reason=SHARE_REASON,
        verdict=Verdict.SOUND if sound else Verdict.CAUTION,
        summary=f"{run.name} loses {100 * share:.0f} % of its rows as transient",
        advice="" if sound else "run it longer from where it ended, or look for a drift that does not end",
    )


def transient_rules(combined: DensityOfStates) -> list[Finding]:
    """One finding a run, cold to hot: what lies between the start used and that of a second, different rule.

    Measured by the run's mean energy, in its standard errors.
    """
    return [_difference(combined.runs[i]) for i in combined.cold_to_hot]


def _difference(run: RunRecord) -> Finding:
    series = run.thinned.means()[:, 0]
    group = run.thinned.group
    used, second = run.transient_rows // group, least_error_start(series)
    within = float(run.thinned.within_variance()[max(used, second) :, 0].mean())
    found = start_difference(series, used, second, group, within)
    sound = found <= LARGEST_DIFFERENCE
    summary = f"{run.name} starts at row {run.transient_rows:,}, by a second rule at row {second * group:,}: "
    summary += f"that moves its mean energy by {found:.1f} standard errors"
    advice = "look at its energies against time (reweight runs FILE --plot PICTURE shows slow drift)"
    if second > used:
        advice += f"; discard = {second * group} would follow the second rule"
    return Finding(
        check="transient rules",
        offender=run.name,
        found=found,
        limit=LARGEST_DIFFERENCE,
        limit_reason=DIFFERENCE_REASON,
        verdict=Verdict.SOUND if sound else Verdict.CAUTION,
        summary=summary,
        advice="" if sound else advice,
    )
