"""What was held while energies fluctuated, and how much of their fluctuation was recorded."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["CONSTANT_VOLUME", "Ensemble"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Ensemble:
    """Names and additions that follow from the conditions of the runs.

    Attributes
    ----------
    constant_pressure : bool
        What stands in the place of the energy is the enthalpy.
    degrees_of_freedom : int
        Classical momenta that the recorded energies leave out; each adds k_B / 2 to the heat capacity.
    """

    constant_pressure: bool = False
    degrees_of_freedom: int = 0

    @property
    def energy_name(self) -> str:
        """What the energy is called."""
        return "enthalpy" if self.constant_pressure else "energy"


CONSTANT_VOLUME = Ensemble()
