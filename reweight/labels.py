"""All attributes of labelled outputs, in one place.

Attributes follow the CF conventions where they have a say (``units`` in UDUNITS spelling, ``long_name``,
``ancillary_variables``, ``units_metadata``); there is no ``standard_name`` for these quantities.
"""

from __future__ import annotations

from reweight.units import REDUCED, canonical_unit, per_kelvin

__all__ = [
    "energy_unit_label",
    "error_attributes",
    "per_temperature",
    "product_unit",
    "temperature_attributes",
    "value_attributes",
]

Attributes = dict[str, str]


def temperature_attributes(temperature_unit: str) -> Attributes:
    """Attributes of a temperature axis."""
    attributes = {"units": canonical_unit(temperature_unit), "long_name": "temperature"}
    if temperature_unit != REDUCED:
        attributes["units_metadata"] = "temperature: on_scale"
    return attributes


def per_temperature(unit: str, temperature_unit: str) -> str:
    """UDUNITS spelling of a unit divided by the unit of temperature differences."""
    if temperature_unit == REDUCED:
        return unit
    return "K-1" if unit == "1" else per_kelvin(unit)


def product_unit(first: str, second: str) -> str:
    """UDUNITS spelling of a product."""
    factors = [unit for unit in (first, second) if unit != "1"]
    return " ".join(factors) or "1"


def value_attributes(
    label: str, long_name: str, unit: str, *, per: str | None, per_kelvin_unit: bool, comment: str = ""
) -> Attributes:
    """Attributes of an answer."""
    attributes = {
        "units": unit,
        "long_name": long_name if per is None else f"{long_name} per {per}",
        "ancillary_variables": f"{label}_standard_error {label}_interval {label}_within_reach",
    }
    if per_kelvin_unit and "K-1" in unit:
        attributes["units_metadata"] = "temperature: difference"
    if comment:
        attributes["comment"] = comment
    return attributes


def error_attributes(value: Attributes, *, level: float | None = None) -> Attributes:
    """Attributes of an answer's standard error, or of its interval at a level."""
    kind = "standard error" if level is None else f"{100 * level:g} % confidence interval"
    attributes = {"units": value["units"], "long_name": f"{kind} of the {value['long_name']}"}
    if "units_metadata" in value:
        attributes["units_metadata"] = value["units_metadata"]
    return attributes


def energy_unit_label(energy_unit: str, *, kelvin: bool = False) -> str:
    """UDUNITS spelling of the energy unit, or of that unit per kelvin."""
    unit = canonical_unit(energy_unit)
    return per_kelvin(unit) if kelvin else unit
