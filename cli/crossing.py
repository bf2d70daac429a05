"""``reweight crossing``: where a quantity takes a value."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    from reweight.answers.crossing import Crossing
    from reweight.density_of_states import DensityOfStates

__all__ = ["crossing"]


@click.command(short_help="Temperature at which any quantity takes a value.")
@click.argument("file", type=options.plain_path)
@click.option("--of", required=True, metavar="NAME", help="Quantity.")
@click.option(
    "--equals", required=True, type=float, metavar="VALUE", help="Value, in the unit of the answers."
)
@options.range_options
@options.linear_question_options
@options.table_options
def crossing(
    file: Path,
    of: str,
    equals: float,
    lowest: float | None,
    highest: float | None,
    per_count: bool,
    energy_unit: str | None,
    level: float,
    beyond_reach: bool,
    csv: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Find the temperatures at which a quantity takes a value, refined below any grid, with error bars.

    FILE is a combined file.  A crossing whose slope is lost in its own error is said to be uncertain.
    """
    from reweight.answers.crossing import crossings

    combined = screen.opened(file, quiet=quiet, outputs=(csv,), force=force)
    found = crossings(
        combined,
        of=of,
        equals=equals,
        lowest=lowest,
        highest=highest,
        level=level,
        per_count=per_count,
        energy_unit=energy_unit,
        beyond_reach=beyond_reach,
    )
    units = _units(combined, found[0])
    if csv is not None:
        records = [_flat(each, units) for each in found]
        screen.write_csv(
            csv, list(records[0]), [list(each.values()) for each in records], force=force, inputs=[file]
        )
    screen.tell_written(csv, quiet=quiet)
    if as_json:
        records = [dataclasses.asdict(each) for each in found]
        screen.print_json(screen.envelope(combined, "crossing", level=level, units=units, crossings=records))
        return
    for each in found:
        for line in _lines(combined, each, level, units):
            click.echo(line)


def _units(combined: DensityOfStates, found: Crossing) -> dict[str, str]:
    from reweight.labels import per_temperature

    return {
        "temperature": combined.description.temperature_label or "1",
        "equals": found.unit,
        "slope": per_temperature(found.unit, combined.description.temperature_unit),
    }


def _flat(found: Crossing, units: dict[str, str]) -> dict[str, Any]:
    """One row of a table, by column heading."""
    temperature = (found.temperature, found.temperature_standard_error, *found.temperature_interval)
    counted_from = found.reference_temperature
    return {
        "of": found.of,
        **({} if counted_from is None else {f"reference_temperature [{units['temperature']}]": counted_from}),
        f"equals [{units['equals']}]": found.equals,
        **{
            f"temperature{part} [{units['temperature']}]": value
            for part, value in zip(screen.PARTS, temperature, strict=True)
        },
        f"slope [{units['slope']}]": found.slope,
        f"slope_standard_error [{units['slope']}]": found.slope_standard_error,
        "slope_significant": found.slope_significant,
        "effective_sample_size": found.effective_sample_size,
        "within_reach": found.within_reach,
        **{f"variance_share of {run}": share for run, share in found.variance_share.items()},
    }


def _lines(combined: DensityOfStates, found: Crossing, level: float, units: dict[str, str]) -> list[str]:
    """Say where the crossing is, how steep, and whether its error bar can be trusted."""
    from reweight.notation import bracket, quantity_text, rounded

    unit = combined.description.temperature_label
    (quantity,) = combined.quantities([found.of])
    name = quantity.long_name + (f" per {found.per}" if found.per else "")
    if found.reference_temperature is not None:
        name += f", counted from {quantity_text(f'{found.reference_temperature:.6g}', unit)},"
    value = quantity_text(f"{found.equals:.10g}", found.unit)
    at = quantity_text(bracket(found.temperature, found.temperature_standard_error), unit)
    slope = quantity_text(bracket(found.slope, found.slope_standard_error), units["slope"])
    mark = "" if found.within_reach else ", beyond the reach of these runs"
    if not found.slope_significant:
        return [
            f"{name} equals {value} at about {quantity_text(f'{found.temperature:.6g}', unit)}{mark}",
            f"  uncertain: its slope there, {slope}, is less than three of its standard errors; the standard error "
            "of the temperature and its interval are not to be trusted",
        ]
    low, high = (rounded(each, found.temperature_standard_error) for each in found.temperature_interval)
    return [
        f"{name} equals {value} at {at}, {100 * level:g} % interval {low} to {high}{mark}",
        f"  slope {slope}",
    ]
