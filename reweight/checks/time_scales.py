"""Time scales: whether a slow process hides behind the fast ones, so that samples look more independent than they are."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from reweight.checks.finding import Finding, Verdict
from reweight.density_of_states import DensityOfStates, RunRecord
from reweight.series.time_scales import FEWEST_BLOCKS, TimeScales, differ

__all__ = ["slowest_times", "two_time_scales"]

LARGEST_RATIO = 1.5
FALSE_ALARMS_TOGETHER = 0.01  # of a whole study
FALSE_ALARMS_SINGLE = (
    0.003  # asked for; the ratio has a longer tail than a normal one, 0.02 was measured at most
)
RATIO_REASON = (
    "averages over long blocks and the course of the series tell the same correlation if there is one time scale; "
    "a larger ratio in 1 of 50 studies at most is chance"
)

FEWEST_SLOWEST = 20.0
SLOWEST_REASON = (
    "runs that spanned 8 times of their slowest process had intervals that covered 88-90 % of nominal 95 %, "
    "from 20 on nominal"
)


def two_time_scales(combined: DensityOfStates) -> list[Finding]:
    """One finding a recorded column for all runs together, or one for each run in which the two estimates differ."""
    runs = [combined.runs[i] for i in combined.cold_to_hot]
    findings = []
    names = list(runs[0].time_scales)
    for name in names:
        scales = [run.time_scales[name] for run in runs]
        usable = [each for each in scales if each.block_count >= FEWEST_BLOCKS and not each.series.constant]
        if not usable:
            continue
        alone = [
            each
            for each in usable
            if differ(
                [each],
                LARGEST_RATIO,
                comparisons=len(names) * len(usable),
                false_alarms=FALSE_ALARMS_SINGLE,
            )
        ]
        rest = [each for each in usable if each not in alone]
        most = len(alone) > 1 and len(alone) > len(rest)
        together = most or (
            len(rest) > 1
            and differ(rest, LARGEST_RATIO, comparisons=len(names), false_alarms=FALSE_ALARMS_TOGETHER)
        )
        if together or not alone:
            findings.append(_ratio("all runs", name, usable, found=together))
        else:
            findings += [
                _ratio(run.name, name, [each], found=True)
                for run, each in zip(runs, scales, strict=True)
                if each in alone
            ]
    return findings


def _ratio(offender: str, name: str, scales: Sequence[TimeScales], *, found: bool) -> Finding:
    logs = [np.log(each.blocks.value / each.series.value) for each in scales]
    ratio = float(np.exp(np.mean(logs)))
    error = ratio * float(np.sqrt(sum(each.log_ratio_variance for each in scales))) / len(scales)
    return Finding(
        check="time scales",
        offender=offender,
        found=ratio,
        found_standard_error=error,
        limit=LARGEST_RATIO,
        limit_reason=RATIO_REASON,
        verdict=Verdict.CAUTION if found else Verdict.SOUND,
        summary=f"{name} of {offender}: long blocks tell {ratio:.1f} times the correlation of the series",
        advice="a slow process hides behind fast ones: make runs at least twenty of its times long"
        if found
        else "",
    )


def slowest_times(combined: DensityOfStates) -> list[Finding]:
    """One finding a run, cold to hot: how many of its slowest times it spans, energy and observables alike."""
    return [_span(combined.runs[i]) for i in combined.cold_to_hot]


def _span(run: RunRecord) -> Finding:
    varying = {name: each.slower for name, each in run.time_scales.items() if not each.series.constant}
    name = max(varying, key=lambda each: varying[each].value, default="energy")
    slowest = run.time_scales[name].slower
    span = run.samples / slowest.value
    sound = span >= FEWEST_SLOWEST
    return Finding(
        check="slowest times",
        offender=run.name,
        found=span,
        found_standard_error=span * slowest.standard_error / slowest.value,
        limit=FEWEST_SLOWEST,
        limit_reason=SLOWEST_REASON,
        verdict=Verdict.SOUND if sound else Verdict.CAUTION,
        summary=f"{run.name} spans {span:.0f} times of its slowest process ({name})",
        advice="" if sound else f"run it {FEWEST_SLOWEST / span:.1f} times as long",
    )
