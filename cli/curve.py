"""``reweight curve``: quantities against temperature."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    import xarray as xr

    from reweight.density_of_states import DensityOfStates

__all__ = ["curve"]


@click.command(short_help="Mean energy, heat capacity and more against temperature.")
@click.argument("file", type=options.plain_path)
@click.option(
    "--of", multiple=True, metavar="NAME", help="Quantity; repeatable; 'list' shows what can be asked."
)
@options.at_options
@options.range_options
@click.option(
    "--reference",
    type=float,
    metavar="T",
    help="Where entropies are counted from.  [default: coldest run in reach]",
)
@options.question_options
@options.output_options
def curve(
    file: Path,
    of: tuple[str, ...],
    at: tuple[tuple[float, ...], ...],
    points: int | None,
    lowest: float | None,
    highest: float | None,
    reference: float | None,
    per_count: bool,
    energy_unit: str | None,
    level: float,
    errors: str,
    beyond_reach: bool,
    csv: Path | None,
    plot: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Answer quantities at temperatures that need not have been simulated.

    FILE is a combined file.  Without --at, 101 temperatures across the reach of the runs.  Values are printed with
    the standard error of their last digits in brackets; rows out of reach stay empty.
    """
    from reweight.answers.curve import DEFAULT_POINTS, DEFAULT_QUANTITIES
    from reweight.answers.curve import curve as ask
    from reweight.quantities.catalogue import available

    combined = screen.opened(file, quiet=quiet)
    if "list" in of:
        listed = {
            each.name: each.long_name for each in available(combined.description.normalisations).values()
        }
        if as_json:
            screen.print_json(screen.envelope(combined, "quantities", level=None, quantities=listed))
        else:
            screen.print_table(("name", "what"), list(listed.items()), left=(0, 1))
        return
    if at and (points is not None or lowest is not None or highest is not None):
        raise click.UsageError(
            "--at names single temperatures; it does not go with --from, --to or --points."
        )
    temperatures = options.flattened(at) or None
    if temperatures is not None:
        screen.echo_temperatures(combined, temperatures, quiet=quiet)
    dataset = ask(
        combined,
        temperatures,
        of=of or DEFAULT_QUANTITIES,
        lowest=lowest,
        highest=highest,
        points=DEFAULT_POINTS if points is None else points,
        reference=reference,
        level=level,
        per_count=per_count,
        energy_unit=energy_unit,
        beyond_reach=beyond_reach,
    )
    if csv is not None:
        header, rows = _numbers(dataset)
        screen.write_csv(csv, header, rows, force=force, inputs=[file])
    if plot is not None:
        from reweight.figures.curves import curve_figure
        from reweight.figures.style import save_figure

        save_figure(curve_figure(combined, dataset), plot, force=force, inputs=[file])
    if as_json:
        screen.print_json(screen.envelope(combined, "curve", level=level, **_content(combined, dataset)))
    else:
        _print(dataset)
    outside = int((~dataset["within_reach"]).sum())
    screen.tell_outside(outside, dataset.sizes["temperature"], beyond=beyond_reach, quiet=quiet)
    if outside:
        _say_why(combined, dataset, of or DEFAULT_QUANTITIES, quiet=quiet)


def _say_why(combined: DensityOfStates, dataset: xr.Dataset, names: Sequence[str], *, quiet: bool) -> None:
    """Tell how far each quantity that left the reach goes, and what ends it."""
    from reweight.answers.reach import reach
    from reweight.notation import within

    for label, name in zip(_labels(dataset), names, strict=True):
        if bool(dataset[f"{label}_within_reach"].all()):
            continue
        ends = reach(combined, name)
        if ends.empty:
            screen.message(f"  {name}: {ends.limited_by[0]}", quiet=quiet)
            continue
        low, high = within(ends.lowest, ends.highest)
        screen.message(
            f"  {name}: within {low} to {high}; colder: {ends.limited_by[0]}; hotter: {ends.limited_by[1]}",
            quiet=quiet,
        )


def _labels(dataset: xr.Dataset) -> list[str]:
    return [str(name) for name in dataset.data_vars if f"{name}_interval" in dataset]


def _content(combined: DensityOfStates, dataset: xr.Dataset) -> dict[str, Any]:
    labels = _labels(dataset)
    names = ["temperature", *labels]
    content: dict[str, Any] = {"units": {name: dataset[name].attrs["units"] for name in names}}
    content["temperature"] = dataset["temperature"].to_numpy()
    content["beta"] = combined.description.inverse_temperature(content["temperature"])
    for label in labels:
        for part in ("", "_standard_error", "_interval", "_within_reach", "_variance_share"):
            content[label + part] = dataset[label + part].to_numpy()
    for name in ("effective_sample_size", "within_reach", "run"):
        content[name] = dataset[name].to_numpy()
    return content


def _numbers(dataset: xr.Dataset) -> tuple[list[str], list[list[Any]]]:
    header, columns = (
        [f"temperature [{dataset['temperature'].attrs['units']}]"],
        [dataset["temperature"].to_numpy()],
    )
    for label in _labels(dataset):
        unit = dataset[label].attrs["units"]
        interval = dataset[f"{label}_interval"].to_numpy()
        header += [f"{label}{part} [{unit}]" for part in screen.PARTS]
        columns += [
            dataset[label].to_numpy(),
            dataset[f"{label}_standard_error"].to_numpy(),
            interval[:, 0],
            interval[:, 1],
        ]
    header += ["effective_sample_size [1]", "within_reach"]
    columns += [dataset["effective_sample_size"].to_numpy(), dataset["within_reach"].to_numpy()]
    return header, [[each.item() for each in row] for row in zip(*columns, strict=True)]


def _print(dataset: xr.Dataset) -> None:
    from reweight.notation import bracket, quantity_text

    labels = _labels(dataset)
    titles = [
        quantity_text(f"{dataset[label].attrs['long_name']}", "") + _in(dataset[label].attrs["units"])
        for label in labels
    ]
    rows = []
    for place, temperature in enumerate(dataset["temperature"].to_numpy()):
        cells = [f"{temperature:.6g}"]
        for label in labels:
            value = float(dataset[label][place])
            error = float(dataset[f"{label}_standard_error"][place])
            mark = "" if bool(dataset[f"{label}_within_reach"][place]) else " !"
            cells.append("-" if value != value else bracket(value, error) + mark)
        cells.append(f"{float(dataset['effective_sample_size'][place]):.0f}")
        rows.append(cells)
    temperature_title = "temperature" + _in(dataset["temperature"].attrs["units"])
    screen.print_table((temperature_title, *titles, "effective samples"), rows)


def _in(unit: str) -> str:
    return "" if unit == "1" else f" [{unit}]"
