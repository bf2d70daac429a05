"""Confidence intervals: estimate plus and minus a quantile of Student's t times the standard error."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from reweight.errors import InputError

__all__ = ["check_level", "half_width"]


def check_level(level: float) -> None:
    """Refuse a confidence level outside (0, 1)."""
    if not 0 < level < 1:
        hint = " Write 95 % as 0.95." if 1 < level < 100 else ""
        raise InputError(f"level must lie between 0 and 1; got {level:g}.{hint}")


def half_width(
    standard_error: NDArray[np.float64], degrees_of_freedom: NDArray[np.float64], level: float
) -> NDArray[np.float64]:
    """Half the width of the interval, shape (T,), in units of the answer."""
    return np.asarray(standard_error * stdtrit(degrees_of_freedom, 0.5 + level / 2))
