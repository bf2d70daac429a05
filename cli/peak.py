"""``reweight peak``: where a quantity is largest."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    from reweight.answers.peak import Peak
    from reweight.density_of_states import DensityOfStates
    from reweight.uncertainty.resampling import Resamples

__all__ = ["describe_extension", "describe_peak", "peak"]


@click.command(short_help="Position and height of the heat-capacity peak, or of any other.")
@click.argument("file", type=options.plain_path)
@click.option("--of", default="heat_capacity", show_default=True, metavar="NAME", help="Quantity.")
@options.range_options
@options.question_options
@options.output_options
def peak(
    file: Path,
    of: str,
    lowest: float | None,
    highest: float | None,
    per_count: bool,
    energy_unit: str | None,
    level: float,
    errors: str,
    resamples: int,
    seed: int,
    beyond_reach: bool,
    csv: Path | None,
    plot: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Find the maxima of a quantity, refined below any grid, with error bars of position and height.

    FILE is a combined file.  A maximum that does not stand out from its noise is said not to.
    """
    from reweight.answers.peak import peaks

    combined = screen.opened(file, quiet=quiet, outputs=(csv, plot), force=force)
    asked = {"per_count": per_count, "energy_unit": energy_unit, "level": level, "beyond_reach": beyond_reach}
    drawn = _drawn(combined, resamples, seed, needed=errors == "bootstrap", quiet=quiet)
    found = peaks(
        combined,
        of=of,
        lowest=lowest,
        highest=highest,
        resamples=drawn,
        resampled_intervals=errors == "bootstrap",
        **asked,  # type: ignore[arg-type]
    )
    if csv is not None:
        units = (combined.description.temperature_label or "1", found[0].unit)
        records = [_flat(each, *units) for each in found]
        screen.write_csv(
            csv, list(records[0]), [list(each.values()) for each in records], force=force, inputs=[file]
        )
    if plot is not None:
        from reweight.answers.curve import curve
        from reweight.figures.curves import curve_figure
        from reweight.figures.style import save_figure

        dataset = curve(combined, of=of, lowest=lowest, highest=highest, **asked)  # type: ignore[arg-type]
        marked = [each for each in found if each.stands_out]
        save_figure(curve_figure(combined, dataset, marked), plot, force=force, inputs=[file])
    screen.tell_written(csv, plot, quiet=quiet)
    if as_json:
        units = {"temperature": combined.description.temperature_label or "1", "height": found[0].unit}
        records = [_record(each) for each in found]
        content = {"resamples": None if drawn is None else drawn.count, "units": units, "peaks": records}
        used = None if drawn is None else seed
        screen.print_json(screen.envelope(combined, "peak", level=level, errors=errors, seed=used, **content))
    else:
        _print(combined, found, level)


def _drawn(
    combined: DensityOfStates, count: int, seed: int, *, needed: bool, quiet: bool
) -> Resamples | None:
    """Resamples; without them, if the runs are too short and linear-response intervals were asked anyway."""
    from reweight.errors import TooShortError

    try:
        return screen.resamples_of(combined, count, seed, quiet=quiet)
    except TooShortError as error:
        if needed:
            raise
        screen.message(f"not found again in resamples: {error}", quiet=quiet)
        return None


def _record(found: Peak) -> dict[str, Any]:
    import dataclasses

    return dataclasses.asdict(found)


def _flat(found: Peak, temperature_unit: str, height_unit: str) -> dict[str, Any]:
    """One row of a table, by column heading."""
    row: dict[str, Any] = {"of": found.of}
    parts = {
        "temperature": (found.temperature, found.temperature_standard_error, *found.temperature_interval),
        "height": (found.height, found.height_standard_error, *found.height_interval),
    }
    for (name, values), unit in zip(parts.items(), (temperature_unit, height_unit), strict=True):
        row |= {f"{name}{part} [{unit}]": value for part, value in zip(screen.PARTS, values, strict=True)}
    for name in (
        "temperature_bias",
        "height_bias",
        "highest_share",
        "found_share",
        "correlation",
        "prominence",
        "stands_out",
        "at_edge",
        "effective_sample_size",
        "within_reach",
    ):
        row[name] = getattr(found, name)
    for run, (of_temperature, of_height) in found.variance_share.items():
        row |= {
            f"temperature_variance_share of {run}": of_temperature,
            f"height_variance_share of {run}": of_height,
        }
    return row


def _print(combined: DensityOfStates, found: tuple[Peak, ...], level: float) -> None:
    standing = [each for each in found if each.stands_out]
    for each in standing or found[:1]:
        for line in [*describe_peak(combined, each, level), *describe_extension(each)]:
            click.echo(line)
    rest = len(found) - len(standing) if standing else len(found) - 1
    if rest:
        click.echo(
            f"{screen.counted(rest, 'further maximum')} within the noise; --json lists all".replace(
                "maximums", "maxima"
            )
        )


def describe_peak(combined: DensityOfStates, found: Peak, level: float) -> list[str]:
    """Lines that say where a peak is, how high, and how far it stands out."""
    from reweight.notation import bracket, quantity_text, rounded

    unit = combined.description.temperature_label
    (quantity,) = combined.quantities([found.of])
    name = quantity.long_name + (f" per {found.per}" if found.per else "")
    remark = f"; {quantity.comment}" if quantity.comment else ""
    height = quantity_text(bracket(found.height, found.height_standard_error), found.unit)
    if found.at_edge and found.prominence < 3:
        return [
            f"{name}: no maximum inside the searched range; it changes there by less than its errors tell"
        ]
    if found.at_edge:
        at = quantity_text(f"{found.temperature:.6g}", unit)
        return [
            f"{name}: no maximum inside the searched range; it is largest at its edge, {at}, with {height}",
            "the real peak, if there is one, lies beyond: add runs there",
        ]
    at = quantity_text(bracket(found.temperature, found.temperature_standard_error), unit)
    if not found.stands_out:
        return [
            f"{name}: none stands out; the highest, at {at} with {height}, rises {found.prominence:.1f} standard errors "
            "above the valley beside it",
        ]
    low, high = (rounded(each, found.temperature_standard_error) for each in found.temperature_interval)
    bottom, top = (rounded(each, found.height_standard_error) for each in found.height_interval)
    span = f"{100 * level:g} % interval"
    return [
        f"{name} peaks at {at}, {span} {low} to {high}",
        f"  height {height}, {span} {bottom} to {top}{remark}",
        f"  correlation of the two errors {found.correlation:+.2f}; stands {found.prominence:.3g} standard errors "
        "above the valley beside it",
        *_describe_resampling(found),
    ]


def _describe_resampling(found: Peak) -> list[str]:
    """What resampling says of a peak, if it was done."""
    from reweight.answers.resamples import NOTABLE_BIAS

    if found.highest_share is None:
        return []
    sure = f"highest in {100 * found.highest_share:.3g} % of the resamples"
    if found.temperature_bias is None or found.height_bias is None:
        return [f"  resampling: seldom found again; {sure}"]
    ratios = (
        found.temperature_bias / found.temperature_standard_error,
        found.height_bias / found.height_standard_error,
    )
    small = max(map(abs, ratios)) <= NOTABLE_BIAS
    return [
        f"  resampling: bias {ratios[0]:+.2f} and {ratios[1]:+.2f} standard errors"
        f"{'' if small else ' (above a quarter: sample longer)'}; {sure}"
    ]


def describe_extension(found: Peak) -> list[str]:
    """Say which run to extend, and what four times its samples would bring."""
    if not found.stands_out or len(found.variance_share) < 2:
        return []
    name, (share, _) = max(found.variance_share.items(), key=lambda item: item[1][0])
    error = found.temperature_standard_error
    return [
        f"  {100 * share:.0f} % of the variance of the position comes from {name}: four times its samples would bring "
        f"the error from {error:.2g} to {error * (1 - 0.75 * share) ** 0.5:.2g} or less"
    ]
