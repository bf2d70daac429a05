"""How an answer is expressed: total or per count, in which energy unit, under which label."""

from __future__ import annotations

from dataclasses import dataclass

from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError
from reweight.labels import energy_unit_label, per_temperature, product_unit, value_attributes
from reweight.quantities.quantity import Measure, Quantity, Scaling
from reweight.units import canonical_unit, energy_factor

__all__ = ["Presentation", "presentation"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Presentation:
    """Factor and unit of an answer.

    Attributes
    ----------
    factor : float
        By which values on the study's scale are multiplied.
    unit : str
        UDUNITS spelling.
    per : str or None
        What an answer is per; None for totals and intensive quantities.
    per_kelvin : bool
        It is something over a temperature difference.
    """

    factor: float
    unit: str
    per: str | None
    per_kelvin: bool

    def attributes(self, quantity: Quantity, long_name: str, *, linked: bool = True) -> dict[str, str]:
        """Attributes of the labelled values, linked to the variables with their errors where these stand beside them."""
        attributes = value_attributes(
            quantity.label,
            long_name,
            self.unit,
            per=self.per,
            per_kelvin_unit=self.per_kelvin,
            comment=quantity.comment,
        )
        if not linked:
            del attributes["ancillary_variables"]
        return attributes


def presentation(
    combined: DensityOfStates, quantity: Quantity, *, per_count: bool = False, energy_unit: str | None = None
) -> Presentation:
    """Express a quantity as asked.

    Raises
    ------
    InputError
        Per count was asked but the study has no count; or the energy unit cannot be converted to.
    """
    description = combined.description
    asked = description.energy_unit if energy_unit is None else energy_unit
    conversion = energy_factor(description.energy_unit, asked)
    own = _observable_unit(combined, quantity.observable)
    unit, factor = {
        Measure.ENERGY: (energy_unit_label(asked), conversion),
        Measure.ENERGY_PER_KELVIN: (energy_unit_label(asked, kelvin=True), conversion),
        Measure.OBSERVABLE: (own, 1.0),
        Measure.OBSERVABLE_PER_KELVIN: (per_temperature(own, description.temperature_unit), 1.0),
        Measure.OBSERVABLE_ENERGY: (product_unit(own, energy_unit_label(asked)), conversion),
        Measure.NUMBER: ("1", 1.0),
    }[quantity.measure]
    per_kelvin = quantity.measure in (Measure.ENERGY_PER_KELVIN, Measure.OBSERVABLE_PER_KELVIN)
    if not per_count or quantity.scaling is Scaling.INTENSIVE:
        return Presentation(factor=factor, unit=unit, per=None, per_kelvin=per_kelvin)
    if description.count is None:
        raise InputError(
            "answers per particle need the number of particles; the study declares none. "
            "Add count (and per, its name) to [system] and combine again."
        )
    return Presentation(
        factor=factor / description.count, unit=unit, per=description.per, per_kelvin=per_kelvin
    )


def _observable_unit(combined: DensityOfStates, observable: str) -> str:
    units = {each.name: canonical_unit(each.unit) for each in combined.description.observables}
    return units.get(observable, "1")
