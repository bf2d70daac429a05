"""A value with its uncertainty as people write it: 1.234(56).

Two digits of the standard uncertainty, the value to the same place (GUM, JCGM 100:2008, 7.2.6; from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable

__all__ = ["bracket", "printable", "quantity_text", "rounded", "significant", "within"]


def printable(text: str) -> str:
    r"""Write what a terminal would not show as itself as an escape: names of files are data, and may hold anything.

    Examples
    --------
    >>> printable("run 7"), printable("a\nb \u202efdp.exe")
    ('run 7', 'a\\nb \\u202efdp.exe')
    """
    if text.isprintable():
        return text
    return "".join(each if each.isprintable() else each.encode("unicode_escape").decode() for each in text)


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


def rounded(value: float, standard_error: float) -> str:
    """Value to the place of the second digit of its standard error.

    Examples
    --------
    >>> rounded(324.5312, 5.6), rounded(0.29094, 0.0042), rounded(1453.06, 354.0)
    ('324.5', '0.2909', '1450')
    """
    if not (math.isfinite(value) and math.isfinite(standard_error) and standard_error > 0):
        return f"{value:.6g}"
    places = 1 - math.floor(math.log10(standard_error))
    return f"{round(value, places):.{max(places, 0)}f}"


def within(lowest: float, highest: float, digits: int = 4) -> tuple[str, str]:
    """Ends of a range, rounded inwards so that both lie inside it.

    Examples
    --------
    >>> within(238.5501, 521.9401)
    ('238.6', '521.9')
    """
    return _directed(lowest, digits, math.ceil), _directed(highest, digits, math.floor)


def _directed(value: float, digits: int, towards: Callable[[float], int]) -> str:
    if not math.isfinite(value) or value == 0:
        return f"{value:g}"
    places = digits - 1 - math.floor(math.log10(abs(value)))
    return f"{towards(value * 10.0**places) / 10.0**places:.{max(places, 0)}f}"


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
