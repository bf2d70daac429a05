"""Links: whether neighbouring temperatures share enough energies."""

from __future__ import annotations

from reweight.checks.finding import Finding, Verdict
from reweight.density_of_states import DensityOfStates

__all__ = ["SOUND_SHARING", "links"]

SOUND_SHARING = 10.0
REASON = (
    "with 10 independent samples shared across a cut, intervals of free energies covered 93-98 % of nominal 95 %; "
    "with 1 to 3.5 they covered 85-90 %"
)


def links(combined: DensityOfStates) -> list[Finding]:
    """One finding a cut between neighbouring temperatures, cold to hot."""
    findings = []
    runs = [combined.runs[i] for i in combined.cold_to_hot]
    for cold, hot, shared in zip(runs, runs[1:], combined.sharing, strict=False):
        sound = shared >= SOUND_SHARING
        middle = float(combined.description.temperature((cold.beta + hot.beta) / 2))
        unit = f" {combined.description.temperature_label}".rstrip()
        findings.append(
            Finding(
                check="links",
                offender=f"{cold.name} - {hot.name}",
                found=float(shared),
                limit=SOUND_SHARING,
                limit_reason=REASON,
                verdict=Verdict.SOUND if sound else Verdict.UNSOUND,
                summary=f"{cold.name} and {hot.name} share {shared:.2g} independent samples' worth of energies",
                advice="" if sound else f"add a run near {middle:.4g}{unit}",
            )
        )
    return findings
