"""The one table of what can be asked."""

from __future__ import annotations

from collections.abc import Iterable

from reweight.errors import NotInFileError
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.quantities.quantity import Quantity

__all__ = ["available", "named"]


def available() -> dict[str, Quantity]:
    """Quantities by the name they are asked by."""
    quantities: list[Quantity] = [MeanEnergy(), HeatCapacity()]
    return {quantity.name: quantity for quantity in quantities}


def named(names: Iterable[str]) -> list[Quantity]:
    """Look quantities up.

    Raises
    ------
    NotInFileError
        A name is not among those that can be asked; the error lists them.
    """
    known = available()
    unknown = [name for name in names if name not in known]
    if unknown:
        raise NotInFileError(
            f"a quantity must be one of {', '.join(known)}; got {unknown[0]!r}.", available=tuple(known)
        )
    return [known[name] for name in names]
