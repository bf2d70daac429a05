"""A value with its uncertainty as people write it: 1.234(56).

Two digits of the standard uncertainty, the value to the same place (GUM, JCGM 100:2008, 7.2.6; from memory).
"""

from __future__ import annotations

import math

__all__ = ["bracket", "quantity_text", "significant"]


def bracket(value: float, standard_error: float, digits: int = 2) -> str:
    """Concise notation of a value and its standard error.

    Parameters
    ----------
    value, standard_error : float
    digits : int
        Significant digits of the error.

    Examples
    --------
    >>> bracket(100.02147, 0.00035), bracket(1453.06, 35.4), bracket(0.5, 0.0996)
    ('100.02147(35)', '1453(35)', '0.50(10)')
    >>> bracket(213.0, 104.0, digits=1)
    '213(104)'
    """
    if not math.isfinite(value):
        return str(value)
    if not math.isfinite(standard_error) or standard_error <= 0:
        return f"{value:.10g}"
    from uncertainties import ufloat  # heavy, and only display needs it

    # Fixed point as long as that is readable: 213(104), not 2(1)e+02.
    fixed = "f" if 1e-4 <= max(abs(value), standard_error) < 1e7 else ""
    return f"{ufloat(value, standard_error):.{digits}u{fixed}S}"


def significant(value: float, digits: int = 4) -> str:
    """Plain decimal number with so many significant digits.

    Examples
    --------
    >>> significant(2.2691853), significant(310.0), significant(0.001234567)
    ('2.269', '310', '0.001235')
    """
    return f"{value:.{digits}g}"


def quantity_text(number: str, unit: str) -> str:
    """Join a number to its unit; reduced quantities (unit "1") stay bare."""
    return number if unit in ("", "1") else f"{number} {unit}"
