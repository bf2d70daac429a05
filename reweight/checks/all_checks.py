"""The one table of checks."""

from __future__ import annotations

from collections.abc import Callable

from reweight.checks.finding import Finding
from reweight.checks.length import length
from reweight.checks.links import links
from reweight.density_of_states import DensityOfStates

__all__ = ["CHECKS", "findings"]

CHECKS: tuple[Callable[[DensityOfStates], list[Finding]], ...] = (links, length)


def findings(combined: DensityOfStates) -> list[Finding]:
    """Findings of every check on a combined object."""
    return [finding for check in CHECKS for finding in check(combined)]
