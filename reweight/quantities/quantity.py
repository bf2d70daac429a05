"""What a quantity is: a name, a unit rule, and a smooth function of canonical moments.

To add one: a new file with a subclass, and one line in the table of :mod:`reweight.quantities.catalogue`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from enum import Enum

import numpy as np
from numpy.typing import NDArray

from reweight.quantities.moments import Moment, Moments

__all__ = ["Measure", "Quantity", "Scaling"]

Array = NDArray[np.float64]


class Measure(Enum):
    """Unit rule: how the unit of a quantity follows from the study's units."""

    ENERGY = "energy"
    ENERGY_PER_KELVIN = "energy per kelvin"
    OBSERVABLE = "observable"
    OBSERVABLE_PER_KELVIN = "observable per kelvin"
    OBSERVABLE_ENERGY = "observable times energy"
    NUMBER = "number"


class Scaling(Enum):
    """What happens to a quantity in answers per atom or site."""

    EXTENSIVE = "divided by the count"
    INTENSIVE = "unchanged"


class Quantity(ABC):
    """A smooth function of canonical moments.

    Attributes
    ----------
    name : str
        As asked by a user: ``energy``, ``heat_capacity``, ``order.mean``.
    label : str
        Name of the variable in outputs.
    long_name : str
    comment : str
        What a reader must know to compare it with a value from elsewhere; usually empty.
    measure : Measure
    scaling : Scaling
    observable : str
        The observable it belongs to; empty for the energy.
    fluctuation : bool
        It measures fluctuations, which lean harder on rare energies: the reach is judged by the stricter rule.
    from_reference : bool
        Only differences from a reference temperature are determined.
    """

    name: str
    label: str
    long_name: str
    comment: str = ""
    measure: Measure
    scaling: Scaling = Scaling.INTENSIVE
    observable: str = ""
    fluctuation: bool = False
    from_reference: bool = False

    @abstractmethod
    def value(self, moments: Moments) -> Array:
        """Value at each temperature, shape (T,), on the study's scale."""

    @abstractmethod
    def gradient(self, moments: Moments) -> dict[Moment, Array]:
        """Derivative with respect to each moment it is made of, shape (T,) each."""
