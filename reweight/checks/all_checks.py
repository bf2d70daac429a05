"""The one table of checks."""

from __future__ import annotations

from collections.abc import Callable
from weakref import WeakKeyDictionary

from reweight.checks.doubled_start import doubled_start
from reweight.checks.far_samples import far_samples
from reweight.checks.finding import Finding
from reweight.checks.length import length
from reweight.checks.links import links
from reweight.checks.time_scales import slowest_times, two_time_scales
from reweight.checks.transient import transient_length, transient_rules
from reweight.density_of_states import DensityOfStates

__all__ = ["CHECKS", "findings"]

CHECKS: tuple[Callable[[DensityOfStates], list[Finding]], ...] = (
    far_samples,
    links,
    length,
    slowest_times,
    two_time_scales,
    transient_length,
    transient_rules,
    doubled_start,
)

# A command asks more than once, and some checks solve again.
_FOUND: WeakKeyDictionary[DensityOfStates, tuple[Finding, ...]] = WeakKeyDictionary()


def findings(combined: DensityOfStates) -> list[Finding]:
    """Findings of every check on a combined object."""
    if combined not in _FOUND:
        _FOUND[combined] = tuple(finding for check in CHECKS for finding in check(combined))
    return list(_FOUND[combined])
