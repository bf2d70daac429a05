"""What is tallied, and where energies are collected."""

from __future__ import annotations

from dataclasses import dataclass

from reweight.tally.levels import Spacing
from reweight.tally.panels import ORDER

__all__ = ["COUNT", "Column", "Nodes"]


@dataclass(frozen=True, slots=True)
class Column:
    """One tallied column: a power of an observable, or of its absolute value, or whether it exceeds a value.

    Attributes
    ----------
    observable : str
        Name; empty for the plain count.
    power : int
    absolute : bool
    above : float or None
        The column is 1 where the observable is greater than this, and 0 elsewhere.
    """

    observable: str = ""
    power: int = 0
    absolute: bool = False
    above: float | None = None


COUNT = Column()


@dataclass(frozen=True, slots=True)
class Nodes:
    """Where energies are collected: panels of a width, or discrete levels.

    Attributes
    ----------
    width : float
        Of the panels; kept for levels, too, which may have to be poured later.
    discrete : bool
        Levels.
    spacing : Spacing or None
        Grid to which energies are snapped first.
    """

    width: float
    discrete: bool = False
    spacing: Spacing | None = None

    @property
    def order(self) -> int:
        """Numbers kept per key and column."""
        return 1 if self.discrete else ORDER
