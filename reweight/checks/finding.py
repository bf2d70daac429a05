"""A finding: what was looked at, what was found, against which limit, and what to do."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum

__all__ = ["Finding", "Verdict", "worst"]


class Verdict(IntEnum):
    """How much a finding matters, in rising order."""

    SOUND = 0
    CAUTION = 1
    UNSOUND = 2

    def __str__(self) -> str:
        return self.name.lower()


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One finding of one check.

    Attributes
    ----------
    check : str
        Name of the check.
    offender : str
        Run, or pair of runs, it is about.
    found : float
        The number found, in the unit of the limit.
    found_standard_error : float or None
    limit : float
    limit_reason : str
        Where the limit comes from.
    verdict : Verdict
    summary, advice : str
        One line each: what it means, what to do.
    """

    check: str
    offender: str
    found: float
    found_standard_error: float | None = None
    limit: float
    limit_reason: str
    verdict: Verdict
    summary: str
    advice: str


def worst(findings: Sequence[Finding]) -> Verdict:
    """Verdict on a study: that of its worst finding."""
    return max((finding.verdict for finding in findings), default=Verdict.SOUND)
